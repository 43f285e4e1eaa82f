"""The races: this synthesis against what a careful user would call every period instead.

Problem. One period of predictive control of N coupled sections over T steps, closed loop and warm. Given the measured
state, find the first inputs to a stated accuracy (largest error against the exact optimum, in spans of the inputs).
Who needs how long?

How it is made fair:

    one process, one thread each, garbage collection off; timed is all that happens from measurement to first inputs
    paired: every period of a course is solved by every racer, one after the other, in turning order, then the next one
    the same accuracy: each racer's tolerance and tuning are calibrated against a truth (`truth`) on a course of the
        same kind and horizon, then verified, and tightened if need be, on the plant that is raced
    warm: every racer starts from its own last answer, keeps its factorisation and updates vectors only

Measuring (`course`, `truth`, `calibrate`, `race`, `alone`, `published`) knows nothing of reporting (`report`,
`picture`). Racers are one file each in `racers`.

    python -m tests.races OUT            table, picture and raw numbers into the folder OUT
    python -m tests.races OUT --sizes 100,1000 --horizons 20 --kinds zones --accuracies 1e-4
"""
