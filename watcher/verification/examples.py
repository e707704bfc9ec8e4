"""Which example is computed by which function, and every published value beside the computed one."""

from __future__ import annotations

from functools import partial
from typing import TYPE_CHECKING

from watcher.verification import additions, lines, read_backs, single_values
from watcher.verification.comparison import Comparison, Refutation
from watcher.verification.inputs import MISPRINTS, VALUES, Inputs, PublishedUnusable

if TYPE_CHECKING:
    from collections.abc import Callable, Iterator

    from watcher.verification.inputs import Value
    from watcher.verification.lines import Numbers

EXAMPLES: dict[str, Callable[[Inputs], Numbers]] = {
    "Norris": lines.norris,
    "NoInt1": partial(lines.through_zero, name="NoInt1"),
    "NoInt2": partial(lines.through_zero, name="NoInt2"),
    "Pontius": lines.pontius,
    "load cell": lines.load_cell,
    "thermometer": lines.thermometer,
    "weighted calibration": lines.weighted_calibration,
    "cadmium by stripping": lines.cadmium_by_stripping,
    "lack of fit with repeats": lines.with_repeats,
    "bank branches": partial(lines.analysis_of_variance, name="lack_of_fit_bank"),
    "cadmium calibration": read_backs.cadmium,
    "fluorescein": read_backs.fluorescein,
    "six standards": read_backs.six_standards,
    "practice calibration": read_backs.practice,
    "wing length": read_backs.wing_length,
    "silver": additions.silver,
    "iron flasks": additions.iron_flasks,
    "strontium": additions.strontium,
    "ascorbic acid": additions.ascorbic_acid,
    "sodium in serum": additions.sodium_in_serum,
    "variable volume": additions.variable_volume,
    "lead": additions.lead,
    "aluminium in gum": additions.aluminium,
    "manganese": additions.manganese,
    "Fieller's limits": additions.fiellers_limits,
    "near the limit": single_values.near_the_limit,
    "Student's t": single_values.quantiles,
    "stock masses": single_values.stock_masses,
    "cadmium stock": single_values.cadmium_stock,
    "cadmium release": single_values.cadmium_release,
}


def recompute(inputs: Inputs) -> tuple[tuple[Comparison, ...], tuple[Refutation, ...]]:
    """Compute every example once and compare it with every value and every misprint.

    Raises
    ------
    PublishedUnusable
        A file cannot be used, lists what nothing computes, or leaves out an example.
    """
    values, misprints = inputs.values(), inputs.misprints()
    _complete({one.example for one in (*values, *(misprint.correct for misprint in misprints))})
    computed = {name: compute(inputs) for name, compute in EXAMPLES.items()}
    numbers = zip(values, _looked_up(computed, VALUES, values), strict=True)
    wanted = tuple(misprint.correct for misprint in misprints)
    corrected = zip(misprints, _looked_up(computed, MISPRINTS, wanted), strict=True)
    return (
        tuple(Comparison(value, number) for value, number in numbers),
        tuple(Refutation(misprint, number) for misprint, number in corrected),
    )


def _complete(listed: set[str]) -> None:
    """Refuse a table that was cut short: few values that agree would look like all of them."""
    if missing := [name for name in EXAMPLES if name not in listed]:
        raise PublishedUnusable(VALUES, 0, f"expected values of every example, got none of {', '.join(missing)}")


def _looked_up(computed: dict[str, Numbers], file: str, values: tuple[Value, ...]) -> Iterator[float]:
    for line, value in enumerate(values, 2):
        of_example = computed.get(value.example, {})
        if value.quantity not in of_example:
            sentence = f"expected something that the program computes, got {value.example}: {value.quantity}"
            raise PublishedUnusable(file, line, sentence)
        yield of_example[value.quantity]
