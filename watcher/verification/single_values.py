"""Published values that need no line: quantiles, blanks, sums of a budget, masses of salts."""

from __future__ import annotations

from math import sqrt
from typing import TYPE_CHECKING

import numpy as np

from rules.atomic_weights import composition, molar_mass
from rules.budget import RECTANGULAR
from rules.interval import student_t
from rules.result import Share, combine
from watcher.verification.worked_export import blanks, case_of

if TYPE_CHECKING:
    from watcher.verification.inputs import Inputs
    from watcher.verification.lines import Numbers

#: Salts whose mass for one gram of an element a public method prints.
SALTS = {
    "As2O3": "As", "BaCl2": "Ba", "CdO": "Cd", "CaCO3": "Ca", "CrO3": "Cr", "CuO": "Cu", "Fe2O3": "Fe",
    "Pb(NO3)2": "Pb", "Li2CO3": "Li", "MgO": "Mg", "HgCl2": "Hg", "KCl": "K", "AgNO3": "Ag", "NaCl": "Na",
    "Sr(NO3)2": "Sr", "TlNO3": "Tl", "NH4VO3": "V", "ZnO": "Zn",
}  # fmt: skip


def stock_masses(_: Inputs) -> Numbers:
    """Grams of a salt that hold one gram of an element."""
    return {
        f"{salt} for 1 g of {element}": molar_mass(salt) / (composition(salt)[element] * molar_mass(element))
        for salt, element in SALTS.items()
    }


def quantiles(_: Inputs) -> Numbers:
    """Student's t: one-sided 99 % is two-sided 98 %."""
    dof = np.array([6, 7, 8, 9, 10, 12, 15, 20, 25, 30, 60])
    pairs = zip(dof.tolist(), student_t(0.98, dof).tolist(), strict=True)
    return {f"one-sided 99 %, {freedom} dof": t for freedom, t in pairs}


def near_the_limit(inputs: Inputs) -> Numbers:
    """Seven samples near the limit and seven blanks, in nA, at 0.229 nA for 1 µmol/L; 3 s and 10 s by the book."""
    samples, empty = (
        case_of(inputs, blanks(inputs.columns("near_the_limit", kind=kind)[0]), "µmol/L").blanks
        for kind in ("sample", "blank")
    )
    scatter, mean = float(samples.sd[0]), float(empty.mean[0])
    slope = 0.229
    return {
        "s of samples, nA": scatter,
        "mean blank, nA": mean,
        "signal at the LOD, nA": mean + 3 * scatter,
        "LOD, µmol/L": 3 * scatter / slope,
        "LOQ, µmol/L": 10 * scatter / slope,
    }


def cadmium_stock(_: Inputs) -> Numbers:
    """100.28 mg (u 0.05 mg) of 0.9999 ± 0.0001 in 100 mL (± 0.1 mL triangular, 0.02 mL, ± 0.084 mL rectangular)."""
    c = 1000 * 100.28 * 0.9999 / 100
    volume = _combined(0.1 / sqrt(6), 0.02, 0.084 / RECTANGULAR)
    by_volume = c * volume / 100
    return {
        "u of the volume, mL": volume,
        "u(c) by the volume, mg/L": by_volume,
        "u(c), mg/L": _combined(by_volume, c * 0.05 / 100.28, c * 0.0001 / RECTANGULAR / 0.9999),
    }


def cadmium_release(_: Inputs) -> Numbers:
    """0.26 mg/L in 0.332 L over 2.37 dm², with the relative uncertainties listed: c, V, a, acid, time, temperature."""
    released = 0.26 * 0.332 / 2.37
    return {"u(r), mg/dm²": released * _combined(0.069, 0.0054, 0.025, 0.0008, 0.001, 0.06)}


def _combined(*uncertainties: float) -> float:
    """Combine standard uncertainties as a budget does."""
    shares = tuple(Share("part", np.array([u]), np.array([np.inf])) for u in uncertainties)
    u, _, _ = combine(shares, tuple(np.ones(1) for _ in shares))
    return float(u[0])
