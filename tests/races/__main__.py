"""Run the races: python -m tests.races OUT [options]."""

import os


def start() -> None:
    """Keep everybody to one thread, which must be said before numpy is imported, and start."""
    for threads in ("OPENBLAS_NUM_THREADS", "OMP_NUM_THREADS", "MKL_NUM_THREADS"):
        os.environ.setdefault(threads, "1")
    from tests.races.command import main

    main()


if __name__ == "__main__":
    start()
