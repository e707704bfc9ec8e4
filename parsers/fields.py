"""The fields of a layout: which words there are and what kind of value each one takes.

Nothing here reads a value.
"""

from __future__ import annotations

#: Texts of a row.
TEXTS = (
    "label", "sample", "role", "analyte", "channel", "level", "stock", "batch", "analyst", "instrument", "comment",
    "duplicate_of", "excluded",
)  # fmt: skip
#: Plain numbers of a row; `signal` may have several columns.
NUMBERS = ("signal", "signal_sd", "signal_rsd", "readings", "replicate", "position")
#: Concentrations: without a unit they take the one of the settings.
CONCENTRATIONS = ("added", "nominal")
#: Quantities of each reading, of which a wide table has one for each analyte.
OF_READINGS = ("concentration", "reported_result", "reference_signal")
#: Volumes and masses: a number without unit says nothing.
VOLUMES = ("spike_volume", "aliquot", "made_up_to", "digest_volume")
MASSES = ("mass",)
QUANTITIES = (*CONCENTRATIONS, *OF_READINGS, *VOLUMES, *MASSES)
ALL = (*TEXTS, *NUMBERS, *QUANTITIES, "predilution", "measured_at")

#: What a named group of a label rule may say.
FROM_LABEL = (
    "sample", "analyte", "channel", "level", "stock", "batch", "comment", "duplicate_of", "replicate", "position",
    *CONCENTRATIONS, *VOLUMES, *MASSES, "predilution",
)  # fmt: skip
#: What a side table may be joined on.
JOINED_ON = ("label", "sample", "position", "level", "batch", "analyte")
#: What a header of a wide table may say by its named groups, and what its columns may hold.
UNFOLD_GROUPS = ("analyte", "channel", "field", "replicate", "unit")
UNFOLD_FIELDS = ("signal", "signal_sd", "signal_rsd", "readings", "nominal", *OF_READINGS)
#: Fields whose missing cell on a sample is a fault: a silent default would change its result.
NEEDED_ON_SAMPLES = ("aliquot", "made_up_to", "mass", "digest_volume", "predilution")
#: Statistics beside a signal: a cell that says nothing does not spoil the signal.
STATISTICS = ("signal_sd", "signal_rsd", "readings")
#: … and neither do these, which no result is computed from.
BESIDE = (*STATISTICS, *OF_READINGS)
#: What a heading that holds for all rows may say when the table has one block only.
FROM_HEADING = (
    "sample", "analyte", "channel", "level", "stock", "batch", "analyst", "instrument", "comment", "duplicate_of",
    "label", "role", *CONCENTRATIONS, *VOLUMES, *MASSES, "predilution",
)  # fmt: skip
#: … and what a heading of a block may say besides.
FROM_BLOCK = (*FROM_HEADING, *NUMBERS, *OF_READINGS, "excluded")
