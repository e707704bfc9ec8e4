"""The exit codes that scripts rely on."""

#: `once` and `explain`: everything passes; a sample fails or is incomplete; something could not be read or done.
ALL_PASS, SAMPLE_FAILS, NOT_DONE = 0, 1, 2
#: `status`.
WELL, ATTENTION, NOT_RUNNING = 0, 1, 2
