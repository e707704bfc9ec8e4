"""Limits as laboratories write them: ``75 to 125 %``, ``at least 0.995``, ``at most 10 %``, ``off``.

A limit judges a number and nothing else; which check it belongs to is said in `rules.checks`.
"""

from __future__ import annotations

import re
from dataclasses import dataclass
from math import inf, isfinite
from typing import Self

_NUMBER = r"[-+\u2212]?\d+(?:\.\d+)?(?:[eE][-+]?\d+)?"
_UNIT = r"\s*(?P<unit>%|LOQ)?"
_RANGE = re.compile(rf"^(?P<low>{_NUMBER})\s*%?\s+to\s+(?P<high>{_NUMBER}){_UNIT}$")
_ONE_SIDED = re.compile(rf"^(?P<word>at least|at most|below|above)\s+(?P<bound>{_NUMBER}){_UNIT}$")


class LimitUnreadable(ValueError):
    """A limit was written in a form that is not known; the text says which forms are."""


@dataclass(frozen=True, slots=True)
class Limit:
    """A range in which a value holds.

    Attributes
    ----------
    low, high
        Bounds; infinite where there is none.
    closed
        Whether the bounds themselves hold: ``at most`` is closed, ``below`` is open.
    unit
        ``%``, ``LOQ`` or nothing.
    text
        The limit as written.
    """

    low: float
    high: float
    closed: bool
    unit: str
    text: str

    @classmethod
    def parse(cls, text: str) -> Self:
        """Read a limit.

        Raises
        ------
        LimitUnreadable
            If the text has another form, or low is above high.

        >>> Limit.parse("75 to 125 %").high
        125.0
        >>> Limit.parse("below 0.1").closed
        False
        """
        wording = " ".join(text.split())
        if found := _RANGE.match(wording):
            low, high = _number(found["low"]), _number(found["high"])
            if low > high:
                raise LimitUnreadable(f"expected the smaller number first, got '{text}'")
            return cls(low, high, closed=True, unit=found["unit"] or "", text=wording)
        if found := _ONE_SIDED.match(wording):
            bound = _number(found["bound"])
            upper = found["word"] in ("at most", "below")
            low, high = (-inf, bound) if upper else (bound, inf)
            return cls(low, high, found["word"].startswith("at"), found["unit"] or "", wording)
        raise LimitUnreadable(
            f"expected a limit such as '75 to 125 %', 'at least 0.995', 'at most 10 %', 'below 0.1' or 'off', "
            f"got '{text}'"
        )


@dataclass(frozen=True, slots=True)
class CheckLimits:
    """What a check is judged by.

    Attributes
    ----------
    warn, fail
        The limits; None where there is none. Both None: the check is off.
    stated
        True where the laboratory wrote them, False for the program's defaults.
    """

    warn: Limit | None
    fail: Limit | None
    stated: bool

    @property
    def off(self) -> bool:
        """Whether the check is switched off."""
        return self.warn is None and self.fail is None

    @property
    def bounds(self) -> tuple[float, ...]:
        """Every finite bound, of warning and failing."""
        limits = [limit for limit in (self.warn, self.fail) if limit is not None]
        return tuple(bound for limit in limits for bound in (limit.low, limit.high) if isfinite(bound))

    @property
    def text(self) -> str:
        """Both limits in words."""
        parts = [f"{word} unless {limit.text}" for word, limit in (("fail", self.fail), ("warn", self.warn)) if limit]
        return "; ".join(parts) or "off"


def _number(text: str) -> float:
    return float(text.replace("\u2212", "-"))


def parse_check_limits(stated: str | dict[str, str]) -> CheckLimits:
    """Read what settings say of one check: a bare limit is a fail limit.

    Raises
    ------
    LimitUnreadable
        If a limit cannot be read or a key is neither ``warn`` nor ``fail``.

    >>> parse_check_limits("off").off
    True
    >>> parse_check_limits({"warn": "at most 5 %", "fail": "at most 10 %"}).text
    'fail unless at most 10 %; warn unless at most 5 %'
    """
    if isinstance(stated, str):
        return CheckLimits(None, None if stated.strip() == "off" else Limit.parse(stated), stated=True)
    if unknown := sorted(set(stated) - {"warn", "fail"}):
        raise LimitUnreadable(f"expected the keys 'warn' and 'fail', got '{unknown[0]}'")
    limits = {word: None if text.strip() == "off" else Limit.parse(text) for word, text in stated.items()}
    return CheckLimits(limits.get("warn"), limits.get("fail"), stated=True)


def _default(*, warn: str | None = None, fail: str | None = None) -> CheckLimits:
    return CheckLimits(
        None if warn is None else Limit.parse(warn), None if fail is None else Limit.parse(fail), stated=False
    )


#: What a bracket must have; it is no number and can only be switched off.
BOTH_SIDES = Limit(-inf, inf, closed=True, unit="", text="both")

#: Limits that hold until the laboratory states its own, with where they come from.
DEFAULTS: dict[str, CheckLimits] = {
    # EPA SW-846 7000B, 9.10: three additions near 50, 100 and 150 % of the native level
    "levels": _default(fail="at least 1", warn="at least 3"),
    # E. C. Fieller, J. R. Stat. Soc. B 16 (1954) 175: g >= 1 leaves no finite interval
    "slope_certainty": _default(fail="below 1", warn="below 0.1"),
    # EPA SW-846 7000B, 9.10
    "correlation": _default(warn="at least 0.995"),
    # J. Mandel, The Statistical Analysis of Experimental Data (1964): F test of the quadratic term
    "curvature": _default(fail="at least 0.01"),
    # N. R. Draper, H. Smith, Applied Regression Analysis, 3rd ed. 1998
    "lack_of_fit": _default(fail="at least 0.01"),
    # common practice
    "residual": _default(fail="at most 10 %"),
    # precision: u is proportional to (C + T)/T; S. L. R. Ellison, M. Thompson, Analyst 133 (2008) 992
    "addition_size": _default(fail="0.5 to 10"),
    # EPA SW-846 6010D and 7000B, spike before preparation
    "recovery": _default(fail="75 to 125 %"),
    # EPA 200.9 rev 2.2, 9.4
    "spike_size": _default(warn="at least 25 %"),
    # common practice
    "matrix_effect": _default(warn="-20 to 20 %"),
    # common practice
    "repeatability": _default(warn="at most 5 %", fail="at most 10 %"),
    # EPA SW-846 6010D and 7000B, continuing verification
    "check_standard": _default(fail="90 to 110 %"),
    # EPA SW-846 6010D: every ten samples and at the end of the run
    "bracket": CheckLimits(None, BOTH_SIDES, stated=False),
    # EPA SW-846 6010D, 9.7
    "blank": _default(fail="below 0.5 LOQ"),
    # EPA SW-846 6010D, laboratory control sample
    "spiked_blank": _default(fail="80 to 120 %"),
    # EPA SW-846 6010D and 7000B
    "duplicate": _default(fail="at most 20 %"),
    # common practice: two standard uncertainties are rare, three should not happen
    "channels_agree": _default(warn="at most 2", fail="at most 3"),
    # EPA SW-846 6010D, five-fold dilution (from memory: verify before quoting)
    "dilution_test": _default(fail="-20 to 20 %"),
}
#: EPA SW-846 7000B, 9.8.1: a spike after preparation is judged more narrowly.
RECOVERY_AFTER_PREPARATION = _default(fail="80 to 120 %")
