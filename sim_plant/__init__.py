"""The plant that is not there: physics, instruments, faults, panel and servers for the bench.

It knows neither the controllers nor the gateway: whoever builds it hands over physics objects and names. Physics is in
SI units; signals are in the engineering units of their instruments, converted at the instrument.

    physics      what one section does by nature, one file per kind                dx/dt = f(x, u, w, inflow)
    stacking     sections of one kind as arrays, so that all are computed at once
    network      sections and couplings as one system                              dx/dt = F(x, u, w),   y = h(x)
    plant        the network through time, stops and balances                      state in, state out

Everything else stands on these four: what transmitters show of the plant, what goes wrong with them, the panel that
owns the actuators, and the servers that put it on a wire.
"""
