"""Pure calculation: readings and a method become outcomes. No disk, no clock, no mail, no YAML.

Start at `rules.evaluate`.
"""
