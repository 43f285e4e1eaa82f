"""The service between a plant of coupled sections and its synthesis: all that has a clock, a wire, a file or a person.

Problem. Every sampling period, measurements must become inputs in time, or the plant must be left safe: per section one
verdict, one state, and nothing on the wire that nobody vouches for. k counts periods of Ts seconds; instants are
nanoseconds of one injected clock; signals are in their engineering unit, residuals in spans.

The rooms; none imports from a line below its own:

    exit_codes, clock, signals, verdict, status_codes       words and time
    plantfile                                               the one description, and every mistake in it
    hold, authority, safe_hold, saturate                    what a section may do: table, bands, ramps, the last look
    admit_rules, admit                                      what a reading is worth
    sentences, log_lines, logs                              what a person reads
    journal, requests                                       what is remembered, and what is asked
    links                                                   one file per protocol
    tags, design, simulated                                 a plant file made into addresses, numerics, and its twin
    standing, panel_view                                    what a period starts from
    estimating, period_rows, inputs, judging                phases of a period, without I/O
    deciding, delivering                                    what goes out, and what came of it
    worker, deadline                                        where the synthesis runs, and by when
    period                                                  one period: state in, state out
    orders, telling, upkeep                                 around a period: requests, records, housekeeping
    service, control                                        one run: start, supervise, stop
    bench, cli                                              commands
"""
