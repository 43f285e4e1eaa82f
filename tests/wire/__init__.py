"""Whole processes over real sockets and the real clock: the few things that cannot be shown in virtual time."""
