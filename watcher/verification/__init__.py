"""The published examples recomputed: what is computed from which input, and how it compares.

Start at `watcher.verification.examples`. Numbers come from the functions that run in service: where an example is an
export, it is read through a layout and evaluated; where a book gives a bare line, the line is fitted. Nothing here
prints or writes.
"""
