"""The invented laboratory that is measured: its settings, layouts and exports, from a fixed random generator.

Skerry Point Water Laboratory: a flame export of one element (60 rows) and a panel of ten elements over many samples
(about 200,000 rows of ten columns).
"""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

if TYPE_CHECKING:
    from pathlib import Path

ELEMENTS = ("Zn", "Cd", "Pb", "Cu", "Ni", "Co", "Mn", "Fe", "Cr", "As")
#: 1,300 samples of ten elements are 13,000 series; 15 solutions each are 195,000 rows.
PANEL_SAMPLES = 1300
PANEL_SOLUTIONS = ("",) * 3 + (" +A1",) * 4 + (" +A2",) * 4 + (" +A3",) * 4
#: Added concentration in the vessel, mg/L: volumes of 5 mg/L stock in 50 mL.
ADDED = {"": 0.0, " +A1": 0.5, " +A2": 1.0, " +A3": 1.5}
#: Signal per mg/L in the vessel.
SENSITIVITY = 0.1832

CONFIG = """\
laboratory: Skerry Point Water Laboratory
folders: {{exports: ./exports, results: ./results}}
layouts: [layouts/flame.yaml, layouts/panel.yaml]
stocks:
  - {{name: MIX-5, contains: {{{contains}}}, tolerance: 0.5 %}}
bench:
  aliquot: 10 mL
  made_up_to: 50 mL
  levels: {{A1: 5 mL, A2: 10 mL, A3: 15 mL}}
  tolerances: {{aliquot: 0.02 mL, spike_volume: 0.6 %}}
report: additions
blank: none
units: {{export: mg/L, result: mg/L}}
limits: {{recovery: 75 to 125 %, correlation: at least 0.995}}
analytes:
{analytes}
mail: {mail}
watching: {{settle: {settle}, scan: {scan}, events: {events}}}
"""
LABELS = """\
labels:
  - {like: 'BLK *', role: blank}
  - {like: 'STD {nominal}', role: standard}
  - {like: 'CHK {nominal}', role: check_standard}
  - {like: '{sample} +{level}', role: spiked}
  - {like: '{sample}', role: unspiked}
"""
FLAME = f"""\
layout: flame bench
claims: {{file: 'FL-*.csv', text: '^Emission log'}}
separator: ';'
header: '^Run;'
until: '^Averages'
finished: '^End of log'
columns:
  position: Run
  label: Label
  analyte: Element
  signal: [R1, R2, R3]
  measured_at: {{from: [Date, Time], format: '%d.%m.%Y %H:%M:%S'}}
{LABELS}"""
PANEL = f"""\
layout: panel
claims: {{file: 'PN-*.csv'}}
separator: ';'
header: '^Run;'
columns:
  position: Vial
  label: Label
  analyte: Element
  signal: [R1, R2, R3]
  measured_at: {{from: [Date, Time], format: '%d.%m.%Y %H:%M:%S'}}
  comment: Remark
{LABELS}"""


def set_up(
    folder: Path, *, mail_port: int | None = None, events: bool = True, settle: str = "1 s", scan: str = "10 s"
) -> Path:
    """Write settings, layouts and an empty exports folder; return the configuration."""
    (folder / "exports").mkdir(parents=True)
    (folder / "layouts").mkdir()
    (folder / "layouts" / "flame.yaml").write_text(FLAME, "utf-8")
    (folder / "layouts" / "panel.yaml").write_text(PANEL, "utf-8")
    mail = "none"
    if mail_port is not None:
        mail = (
            f"{{server: 127.0.0.1, port: {mail_port}, security: none, from: bench@skerry-point.example, "
            "to: lead@skerry-point.example}"
        )
    config = folder / "config.yaml"
    config.write_text(
        CONFIG.format(
            contains=", ".join(f"{element}: 5 mg/L" for element in ELEMENTS),
            analytes="\n".join(
                f"  {element}: {{linear_to: 3 mg/L, proved_on: 2026-09-14, loq: 0.05 mg/L}}" for element in ELEMENTS
            ),
            mail=mail,
            settle=settle,
            scan=scan,
            events="yes" if events else "no",
        ),
        "utf-8",
    )
    return config


def flame(number: int, *, failing: bool) -> bytes:
    """Return a flame export of 60 rows: 12 standards, blanks and check standards, 12 samples with three additions.

    Parameters
    ----------
    number
        Of the log; it also decides the random numbers.
    failing
        Whether additions to the first sample are found at 60 %, so that a mail is due.
    """
    random = np.random.default_rng([60, number])
    solutions = [(f"STD {c:g}", c) for c in (0.0, 0.5, 1.0, 2.0, 3.0)]
    solutions += [(f"BLK {i}", 0.002) for i in (1, 2, 3)]
    for i in range(12):
        sample = f"{('SED', 'BRN', 'ROOF', 'RIV')[i % 4]}-{1 + (number * 12 + i) % 997}"
        native, found = random.uniform(0.4, 0.9), 0.6 if failing and i == 0 else 1.0
        solutions += [(sample + level, native + found * added) for level, added in ADDED.items()]
        if i % 3 == 2:
            solutions.append(("CHK 1.5", 1.5))
    signals = _signals(random, np.array([c for _, c in solutions]), scatter=0.002)
    rows = [
        f"{run};{label};Zn;{a:.5f};{b:.5f};{c:.5f};01.12.2026;{8 + run // 30:02d}:{2 * (run % 30):02d}:07"
        for run, ((label, _), (a, b, c)) in enumerate(zip(solutions, signals, strict=True), 1)
    ]
    head = [f"Emission log;Skerry Point Water Laboratory\nBatch: {number:04d}\n\nRun;Label;Element;R1;R2;R3;Date;Time"]
    return "\n".join([*head, *rows, "Averages;;;;;;;", "End of log", ""]).encode()


def panel(number: int, samples: int = PANEL_SAMPLES) -> bytes:
    """Return a panel export: ten elements, 15 solutions for each sample, a check standard after every third sample."""
    random = np.random.default_rng([200_000, number])
    labels = [(f"STD {c:g}", c) for c in (0.0, 0.5, 1.0, 2.0, 3.0)] + [(f"BLK {i}", 0.002) for i in (1, 2)]
    for i in range(samples):
        sample = f"{('SED', 'BRN', 'ROOF', 'RIV')[i % 4]}-{i + 1}"
        native = random.uniform(0.4, 0.9)
        labels += [(sample + level, native + ADDED[level]) for level in PANEL_SOLUTIONS]
        if i % 3 == 2:
            labels.append(("CHK 1.5", 1.5))
    concentrations = np.repeat([c for _, c in labels], len(ELEMENTS))
    signals = _signals(random, concentrations, scatter=0.003)
    rows = []
    for place, (a, b, c) in enumerate(signals.tolist()):
        run, element = divmod(place, len(ELEMENTS))
        minute = run // 4
        when = f"{1 + minute // 1440:02d}.12.2026;{minute // 60 % 24:02d}:{minute % 60:02d}:{run % 4 * 15:02d}"
        rows.append(f"{place + 1};{labels[run][0]};{ELEMENTS[element]};{a:.5f};{b:.5f};{c:.5f};{when};{run % 240 + 1};")
    return "\n".join(["Run;Label;Element;R1;R2;R3;Date;Time;Vial;Remark", *rows, ""]).encode()


def _signals(random: np.random.Generator, concentrations: np.ndarray, scatter: float) -> np.ndarray:
    """Return three replicate readings for each solution, preparations scattering by a fraction of the signal."""
    true = 0.0008 + SENSITIVITY * concentrations * random.normal(1, scatter, len(concentrations))
    return true[:, None] * random.normal(1, scatter, (len(true), 3)) + random.normal(0, 0.0002, (len(true), 3))
