"""What each solution's vessel holds: dilution f of the sample, addition A scaled to the undiluted aliquot.

    f = V_a / V,   c = c_S v / V,   A = c / f = c_S v / V_a

One form for every bench practice: made up to a volume, standard on top of the aliquot, again and again into one
vessel. What cannot be known is a fault of the solution, with the sentence that says what is missing; nothing is
assumed. Knows no signals.
"""

from __future__ import annotations

from collections import defaultdict
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np

from parsers.readings import Role
from rules import units
from rules.substances import Substance, concentrations

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from parsers.readings import Quantities, Readings
    from rules.line import Floats
    from rules.method import Measure, Method
    from rules.solutions import Solutions

    Bools = NDArray[np.bool_]

#: Where an export gives a concentration and volumes, both must agree within this (method, section 2).
AGREEMENT = 0.01


@dataclass(frozen=True, slots=True)
class Vessels:
    """What the vessels hold, one entry for each solution.

    Attributes
    ----------
    dilution
        f, fraction of the vessel that is sample (for solids the mass of sample per volume of vessel); NaN where
        unknown.
    addition
        A, added concentration scaled to the aliquot, in the unit of results; 0 for unspiked solutions, NaN where
        unknown.
    added
        c, added concentration in the vessel, in the unit of the vessel.
    predilution
        Factor from aliquot to sample.
    fraction
        V_a / V, what of the vessel is the sample; as `dilution` but where the reference signal follows the sample.
    stock
        Index of the stock used in ``Method.stocks``; -1 where none is involved.
    out_of_date
        Additions from a stock that was not within its dates when they were measured.
    by_volume
        Whether A comes from volumes and a stock; else from a concentration.
    not_added
        Spiked solutions whose stock does not contain the analyte: no addition of it, only a further vessel.
    aliquot, made_up_to, spike_volume
        Volumes in mL; NaN where unknown (`made_up_to` also where the standard goes on top).
    faults
        Solution to the sentences of what is wrong.
    """

    dilution: Floats
    addition: Floats
    added: Floats
    predilution: Floats
    fraction: Floats
    stock: NDArray[np.int32]
    out_of_date: Bools
    by_volume: Bools
    not_added: Bools
    aliquot: Floats
    made_up_to: Floats
    spike_volume: Floats
    faults: dict[int, list[str]]


def fill(readings: Readings, solutions: Solutions, method: Method, accepted_at: float) -> Vessels:
    """Work out dilution and addition of every solution.

    Parameters
    ----------
    readings, solutions
        What the export says.
    method
        The laboratory's decisions: bench, stocks, what a concentration refers to.
    accepted_at
        Seconds since 1970-01-01 in local time; judges the dates of stocks where the export has no times.

    Returns
    -------
    Vessels
        Standards, blanks and check standards are undiluted and hold no addition. Spiked blanks are vessels like those
        of samples, without a portion of solid.
    """
    return _Filling(readings, solutions, method, accepted_at).vessels()


class _Filling:
    """The work of `fill`, step by step, on columns of equal length."""

    def __init__(self, readings: Readings, solutions: Solutions, method: Method, accepted_at: float) -> None:
        self.readings, self.method, self.accepted_at = readings, method, accepted_at
        self.rows = solutions.rows
        self.n = len(self.rows)
        self.substances = [Substance.of(method, name) for name in readings.analyte.names]
        self.faults: dict[int, list[str]] = defaultdict(list)
        role = readings.role[self.rows]
        self.clean = role == Role.SPIKED_BLANK
        self.spiked = (role == Role.SPIKED) | self.clean
        self.sample = self.spiked | (role == Role.UNSPIKED)

    def vessels(self) -> Vessels:
        level_volume, level_added = self._levels()
        aliquot = self._volume("aliquot", self.readings.aliquot, self.method.bench.aliquot)
        made_up_to = self._volume("made_up_to", self.readings.made_up_to, self.method.bench.made_up_to)
        stated_volume = self._column("spike_volume", self.readings.spike_volume, units.VOLUME, None)
        stated_added = self._concentrations("added", self.readings.added)
        # a spiked blank may be named by what it holds, like a check standard
        named = self.clean & np.isnan(stated_volume)
        nominal = np.where(named, self._concentrations("nominal", self.readings.nominal), np.nan)
        stated_added = np.where(np.isnan(stated_added), nominal, stated_added)
        # a level is a default, not a second source: only what the export says row by row must agree
        silent = np.isnan(stated_volume) & np.isnan(stated_added)
        spike = np.where(silent, level_volume, stated_volume)
        added = np.where(silent, level_added, stated_added)
        spike, added = np.where(self.sample, spike, np.nan), np.where(self.sample, added, np.nan)
        has_volume, has_added = self.spiked & np.isfinite(spike), self.spiked & np.isfinite(added)
        self._guard_volumes(aliquot, made_up_to, spike, added)
        liquid = self._dilution(aliquot, made_up_to, np.where(has_volume, spike, 0.0))
        portion = self._portion()
        stock, concentration, not_added, out_of_date = self._stocks(has_volume)
        with np.errstate(invalid="ignore", divide="ignore"):
            # without an aliquot the digest itself is measured, and standard can only be added as a concentration
            by_volume = concentration * spike / aliquot / portion
        by_added = self._from_concentration(added, has_added, liquid, aliquot, made_up_to) / portion
        fraction = liquid * portion
        dilution = self._seen_dilution(liquid) * portion
        self._agree(by_volume, by_added, has_volume & has_added & ~not_added)
        addition = np.where(has_volume, by_volume, by_added)
        addition = np.where(np.isfinite(addition), addition, np.nan)
        addition = np.where(self.spiked & ~not_added, addition, 0.0)
        self._note(
            self.spiked & ~not_added & ~has_volume & ~has_added & (self.readings.level.codes[self.rows] < 0),
            lambda _: "a spiked solution without addition: map added, spike_volume or level, or correct the export",
        )
        return Vessels(
            dilution=dilution,
            addition=addition,
            added=addition * fraction,
            predilution=self._predilution(),
            fraction=fraction,
            stock=stock,
            out_of_date=out_of_date & ~not_added,
            by_volume=has_volume,
            not_added=not_added,
            aliquot=aliquot,
            made_up_to=made_up_to,
            spike_volume=spike,
            faults=dict(self.faults),
        )

    def _note(self, where: Bools, sentence: Any) -> None:
        """Add a fault to every solution of a mask; the sentence is made for each."""
        for solution in np.flatnonzero(where):
            row = self.rows[solution]
            self.faults[int(solution)].append(f"line {self.readings.line[row]}: {sentence(int(solution))}")

    def _concentrations(self, name: str, column: Quantities) -> Floats:
        values, reasons = concentrations(self.readings, column, self.rows, self.method)
        where = np.isin(np.arange(self.n), list(reasons)) & self.sample
        self._note(where, lambda solution: f"{name}: {reasons[solution]}")
        return values

    def _column(self, name: str, column: Quantities, unit: str, default: str | None) -> Floats:
        try:
            return units.of_column(column.take(self.rows), unit, default)
        except units.UnitUnusable as error:
            problem = str(error)
            self._note(np.isfinite(column.values[self.rows]) & self.sample, lambda _: f"{name}: {problem}")
            return np.full(self.n, np.nan)

    def _volume(self, name: str, column: Quantities, default: Measure | None) -> Floats:
        stated = self._column(name, column, units.VOLUME, None)
        if default is not None:
            stated = np.where(np.isfinite(stated), stated, units.of_measure(default, units.VOLUME))
        return np.where(self.sample, stated, np.nan)

    def _levels(self) -> tuple[Floats, Floats]:
        """Return spike volumes in mL and concentrations in the result unit that named levels stand for."""
        column, analytes = self.readings.level, self.readings.analyte
        volumes = np.full(len(column.names) + 1, np.nan)
        added = np.full((len(column.names) + 1, len(analytes.names)), np.nan)
        unknown = np.zeros(len(column.names) + 1, dtype=bool)
        unconvertible: dict[tuple[int, int], str] = {}
        for code, name in enumerate(column.names):
            measure = self.method.bench.levels.get(name)
            if measure is None:
                unknown[code] = True
            elif _is_volume(measure):
                volumes[code] = units.of_measure(measure, units.VOLUME)
            else:
                for analyte, substance in enumerate(self.substances):
                    try:
                        added[code, analyte] = substance.convert(measure, self.method.vessel_unit)
                    except units.UnitUnusable as error:
                        unconvertible[code, analyte] = f"level '{name}': {error}"
        codes = column.codes[self.rows]
        stated = np.isfinite(self.readings.added.values[self.rows]) | np.isfinite(
            self.readings.spike_volume.values[self.rows]
        )
        known = ", ".join(self.method.bench.levels) or "none"
        self._note(
            unknown[codes] & self.spiked & ~stated,
            lambda solution: (
                f"level '{column[int(self.rows[solution])]}' is not among bench.levels ({known}): add it there, or "
                f"correct the label"
            ),
        )
        of_row = analytes.codes[self.rows]
        for (code, of_analyte), reason in unconvertible.items():
            self._note(
                (codes == code) & (of_row == of_analyte) & self.spiked & ~stated, lambda _, reason=reason: reason
            )
        return volumes[codes], added[codes, of_row]

    def _guard_volumes(self, aliquot: Floats, made_up_to: Floats, spike: Floats, added: Floats) -> None:
        with np.errstate(invalid="ignore"):
            for name, column, bad in (
                ("aliquot", aliquot, aliquot <= 0),
                ("made_up_to", made_up_to, made_up_to <= 0),
                ("spike_volume", spike, spike < 0),
                ("added", added, added < 0),
            ):
                self._note(
                    bad & self.sample,
                    lambda i, n=name, c=column: f"{n} is {c[i]:g}, which cannot be: correct the export",
                )
            self._note(
                self.spiked & ((spike == 0) | (np.isnan(spike) & (added == 0))),
                lambda _: "a spiked solution to which 0 was added: correct the label or the addition",
            )
            for column, unit in ((spike, "mL of standard"), (added, self.method.vessel_unit)):
                self._note(
                    self.sample & ~self.spiked & (column > 0),
                    lambda i, c=column, u=unit: (
                        f"an unspiked solution to which {c[i]:g} {u} was added: correct the label or the addition"
                    ),
                )
            content = aliquot + np.where(np.isfinite(spike), spike, 0)
            self._note(
                self.sample & (content > made_up_to * (1 + 1e-9)),
                lambda i: (
                    f"{content[i]:g} mL of aliquot and standard do not fit into made_up_to {made_up_to[i]:g} mL: "
                    f"correct the volumes"
                ),
            )

    def _dilution(self, aliquot: Floats, made_up_to: Floats, spike: Floats) -> Floats:
        with np.errstate(invalid="ignore", divide="ignore"):
            vessel = np.where(np.isfinite(made_up_to), made_up_to, aliquot + spike)
            dilution = np.where(np.isfinite(aliquot), aliquot / vessel, 1.0)
        self._note(
            self.sample & np.isfinite(made_up_to) & np.isnan(aliquot),
            lambda _: "made_up_to is stated and the aliquot is not: state bench.aliquot or map aliquot",
        )
        self._note(
            self.spiked & (spike > 0) & np.isnan(aliquot),
            lambda _: "a volume of standard is stated and the aliquot is not: state bench.aliquot or map aliquot",
        )
        # volumes that cannot be are named by the guards; no number follows from them
        return np.where(self.sample, np.where((dilution > 0) & (dilution <= 1 + 1e-9), dilution, np.nan), 1.0)

    def _portion(self) -> Floats:
        """Return what a litre of digest holds of the solid, in the unit that turns mg/L into results; 1 for liquids."""
        if not self.method.solid:
            return np.ones(self.n)
        mass = self._column("mass", self.readings.mass, units.MASS, None)
        volume = self._column("digest_volume", self.readings.digest_volume, units.VOLUME, None)
        with np.errstate(invalid="ignore"):
            for name, column in (("mass", mass), ("digest_volume", volume)):
                self._note(
                    self.sample & ~self.clean & ~(column > 0),
                    lambda i, n=name, c=column: (
                        f"results in {self.method.result_unit} need {n} above 0, got "
                        f"{'nothing' if np.isnan(c[i]) else f'{c[i]:g}'}: map {n} in the layout, or correct the export"
                    ),
                )
        with np.errstate(invalid="ignore", divide="ignore"):
            # 1 g/mL is 1 kg/L, and mg/L over kg/L is mg/kg
            content = units.MASS_FRACTION if self.method.vessel_unit == units.CONCENTRATION else units.AMOUNT_CONTENT
            held = mass / volume / units.factor(content, self.method.result_unit)
        return np.where(self.sample & ~self.clean, np.where(held > 0, held, np.nan), 1.0)

    def _seen_dilution(self, liquid: Floats) -> Floats:
        """Return the dilution that signals show: none where the reference was diluted with the sample."""
        referred = np.isfinite(self.readings.reference_signal.values[self.rows]) & self.sample
        if self.method.reference == "diluted with the sample":
            return np.where(referred, 1.0, liquid)
        if self.method.reference is None:
            self._note(
                referred & (np.abs(liquid - 1) > 1e-9),
                lambda _: (
                    "aliquot and vessel differ in volume, and nothing says whether the internal standard was added to "
                    "each vessel or diluted with the sample: state reference: per vessel, or diluted with the sample"
                ),
            )
        return liquid

    def _from_concentration(
        self, added: Floats, has_added: Bools, dilution: Floats, aliquot: Floats, made_up_to: Floats
    ) -> Floats:
        """Return A from an added concentration, by what it refers to."""
        with np.errstate(invalid="ignore", divide="ignore"):
            differs = has_added & (np.abs(dilution - 1) > 1e-9)  # rounding of two equal volumes
            refers = self.method.added_refers_to
            if refers is None:
                self._note(
                    differs,
                    lambda _: (
                        "aliquot and vessel differ in volume, and nothing says what the added concentration refers "
                        "to: state added_refers_to: vessel, aliquot or nominal"
                    ),
                )
                return np.where(differs, np.nan, added)
            if refers == "aliquot":
                return added
            if refers == "vessel":
                return added / dilution
            nominal = np.where(np.isfinite(made_up_to), made_up_to, aliquot)
            return np.where(np.isfinite(nominal), added * nominal / aliquot, added)

    def _agree(self, by_volume: Floats, by_added: Floats, both: Bools) -> None:
        allowed = max([AGREEMENT, *(t.value / 100 for t in self.method.bench.tolerances.values() if t.unit == "%")])
        with np.errstate(invalid="ignore", divide="ignore"):
            apart = both & (np.abs(by_volume - by_added) > allowed * np.abs(by_added))
        unit = self.method.vessel_unit
        self._note(
            apart,
            lambda i: (
                f"the volumes give an addition of {by_volume[i]:.6g} {unit} and the stated concentration gives "
                f"{by_added[i]:.6g} {unit}: they must agree within {100 * allowed:g} %; correct the one that is wrong"
            ),
        )

    def _predilution(self) -> Floats:
        stated = self.readings.predilution[self.rows]
        impossible = (stated <= 0) | np.isinf(stated)
        self._note(
            self.sample & impossible,
            lambda i: f"predilution is {stated[i]:g}, which cannot be: correct the export",
        )
        stated = np.where(impossible, np.nan, stated)
        return np.where(
            self.sample & ~np.isnan(self.readings.predilution[self.rows]), stated, self.method.bench.predilution
        )

    def _stocks(self, needed: Bools) -> tuple[NDArray[np.int32], Floats, Bools, Bools]:
        """Choose the stock of every addition by volume.

        The mapped one, else the only one that contains the analyte and is within its dates; where there is no choice,
        the only one that contains it. Being out of date is judged by a check of its own.
        """
        analyte = self.readings.analyte.codes[self.rows]
        names = self.readings.analyte.names
        stocks = self.method.stocks
        content = np.full((len(stocks) + 1, len(names)), np.nan)
        for s, stock in enumerate(stocks):
            for a, name in enumerate(names):
                if name in stock.contains:
                    content[s, a] = self.substances[a].convert(stock.contains[name], self.method.vessel_unit)
        mapped_codes = self.readings.stock.codes[self.rows]
        mapped = mapped_codes >= 0
        chosen, last = np.full(self.n, -1, dtype=np.int32), np.full(self.n, -1, dtype=np.int32)
        valid_count = np.zeros(self.n, dtype=np.int32)
        containing = np.isfinite(content[:-1]).sum(axis=0)[analyte] if len(stocks) else np.zeros(self.n)
        out_of_date = np.zeros(self.n, dtype=bool)
        for s, stock in enumerate(stocks):
            within = self._within_dates(s)
            possible = needed & ~mapped & np.isfinite(content[s, analyte])
            chosen[possible & within] = s
            valid_count += possible & within
            last[possible] = s
            wanted = [code for code, name in enumerate(self.readings.stock.names) if name == stock.name]
            # lots of one name follow each other: the one that was valid, else the last of that name
            by_name = needed & mapped & np.isin(mapped_codes, wanted)
            last[by_name] = s
            chosen[by_name & within] = s
        late = (chosen < 0) & (last >= 0) & (mapped | (containing == 1))
        chosen[late] = last[late]
        out_of_date |= late
        self._note_stock_faults(needed, mapped, chosen, valid_count, np.isfinite(content).any(axis=0)[analyte])
        concentration = content[chosen, analyte]
        nowhere = ~np.isfinite(content).any(axis=0)[analyte] & ~mapped
        not_added = needed & (nowhere | ((chosen >= 0) & np.isnan(concentration)))
        return chosen, concentration, not_added, out_of_date

    def _note_stock_faults(
        self,
        needed: Bools,
        mapped: Bools,
        chosen: NDArray[np.int32],
        count: NDArray[np.int32],
        somewhere: Bools,
    ) -> None:
        names, stocks = self.readings.analyte.names, self.method.stocks
        analyte = self.readings.analyte.codes[self.rows]
        listed = ", ".join(stock.name for stock in stocks) or "none"
        self._note(
            needed & mapped & (chosen < 0),
            lambda i: (
                f"stock '{self.readings.stock[int(self.rows[i])]}' is not among the stocks ({listed}): correct the "
                f"name in the export or the stocks in the settings"
            ),
        )
        self._note(
            needed & (count > 1),
            lambda i: (
                f"{count[i]} stocks contain {names[analyte[i]]}, and nothing says which was used: map stock, or "
                f"give the stocks dates"
            ),
        )
        self._note(
            needed & ~mapped & (count == 0) & (chosen < 0) & somewhere,
            lambda i: (
                f"none of the stocks that contain {names[analyte[i]]} was valid when measured: correct their dates"
            ),
        )

    def _within_dates(self, stock: int) -> Bools:
        measured = self.readings.measured_at[self.rows]
        when = np.where(np.isfinite(measured), measured, self.accepted_at)
        begin, end = self.method.stocks[stock].valid_from, self.method.stocks[stock].valid_until
        return (when >= (-np.inf if begin is None else begin)) & (when <= (np.inf if end is None else end))


def _is_volume(measure: Measure) -> bool:
    try:
        units.factor(measure.unit, units.VOLUME)
    except units.UnitUnusable:
        return False
    return True
