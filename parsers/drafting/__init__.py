"""Drafting a layout from examples: structure, numbers, columns, labels are made out from the text of exports alone.

Where two readings of an example are possible, the one is chosen that ends in an error rather than in a wrong number.
"""
