"""The bench: the main job in one command, for the newcomer and for whoever rehearses.

Problem. Somebody who has never seen a section freeze, hold and come back shall watch it happen, over the real protocol,
on a plant that cannot be hurt, within a minute, and keep a journal and figures afterwards.

    story       what happens when, as a table
    rehearsal   the simulated plant told to misbehave, over OPC UA
    acting      the story acted
    children    the plant and the gateway as child processes
    following   the journal, read while it is written
    lines       what happens, one line each
    glyphs, screen, stage    the live view, and plain lines where there is no terminal
    figures     a run in figures, from its journal
    criteria    what a bench must show
    closing     the summary, for people or as JSON
    bench       all of it in order

Nothing here is in the gateway's way: it reads the journal, and asks as anybody may ask.
"""
