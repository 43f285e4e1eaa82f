"""The simulated plant on a wire, one file per protocol."""
