"""`python -m gateway.cli`: the same as the console script; how `bench` starts its children."""

from gateway.cli import main

if __name__ == "__main__":
    main()
