"""The fields of a layout: which words there are and what kind of value each one takes.

Nothing here reads a value.
"""

from __future__ import annotations

#: Texts of a row.
TEXTS = (
    "label", "sample", "role", "analyte", "channel", "level", "stock", "batch", "analyst", "instrument",
    "duplicate_of", "comment",
)  # fmt: skip
#: Plain numbers of a row; `signal` may have several columns.
NUMBERS = ("signal", "signal_sd", "signal_rsd", "readings", "replicate", "position", "reference_signal")
#: Concentrations: without a unit they take the one of the settings.
CONCENTRATIONS = ("added", "nominal", "concentration", "reported_result")
#: Volumes and masses: a number without unit says nothing.
VOLUMES = ("spike_volume", "aliquot", "made_up_to", "digest_volume")
MASSES = ("mass",)
QUANTITIES = (*CONCENTRATIONS, *VOLUMES, *MASSES)
ALL = (*TEXTS, *NUMBERS, *QUANTITIES, "predilution", "measured_at")

#: What a named group of a label rule may say.
FROM_LABEL = (
    "sample", "analyte", "channel", "level", "stock", "batch", "duplicate_of", "comment", "replicate", "position",
    *QUANTITIES, "predilution",
)  # fmt: skip
#: What a value outside the table may say for every row; other headings are kept as they are.
FROM_HEADING = (
    "sample", "analyte", "channel", "level", "stock", "batch", "analyst", "instrument", "comment", *QUANTITIES,
    "predilution",
)  # fmt: skip
#: What a header of a wide table may say by its named groups, and what its columns may hold.
UNFOLD_GROUPS = ("analyte", "channel", "field")
UNFOLD_FIELDS = ("signal", "signal_sd", "signal_rsd", "readings")
#: Fields whose missing cell on a sample is a fault: a silent default would change its result.
NEEDED_ON_SAMPLES = ("aliquot", "made_up_to", "mass", "digest_volume", "predilution")
#: Statistics beside a signal: a cell that says nothing does not spoil the signal.
STATISTICS = ("signal_sd", "signal_rsd", "readings")
