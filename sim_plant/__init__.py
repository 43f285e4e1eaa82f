"""The plant that is not there: physics, instruments, faults, panel and servers for the bench.

It knows neither the controllers nor the gateway: whoever builds it hands over physics objects and names. Physics is in
SI units; signals are in the engineering units of their instruments, converted at the instrument.
"""
