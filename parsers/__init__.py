"""Pure reading: the bytes of an export and a layout become readings. No disk, no clock, no mail.

Start at `parsers.read`. What leaves this package is described in `parsers.readings`.
"""
