"""The schema of `config.yaml`: which keys there are and what each may hold.

Everything arrives as text and is converted here; unknown keys are faults. Reading files and combining settings with
layouts is done elsewhere.
"""

from __future__ import annotations

import re
from typing import TYPE_CHECKING, Annotated, Any, Literal

from pydantic import (
    BaseModel,
    BeforeValidator,
    ConfigDict,
    Discriminator,
    Field,
    Tag,
    field_validator,
    model_validator,
)

from parsers.wording import got
from rules import units
from rules.limits import CheckLimits, parse_check_limits
from rules.method import Measure
from watcher import scalars, week

if TYPE_CHECKING:
    from collections.abc import Callable


def _read(convert: Callable[[str], Any]) -> BeforeValidator:
    """Convert a text, and say plainly when something else stands there."""

    def validate(value: object) -> Any:
        if isinstance(value, str):
            return convert(value)
        if isinstance(value, (list, dict)):
            raise ValueError(f"expected a single value, got {got(value)}")
        return value

    return BeforeValidator(validate)


Seconds = Annotated[float, _read(scalars.seconds)]
YesNo = Annotated[bool, _read(scalars.yes_or_no)]
Number = Annotated[float, _read(scalars.number)]
Volume = Annotated[Measure, _read(scalars.volume)]
Concentration = Annotated[Measure, _read(scalars.concentration)]
LevelAmount = Annotated[Measure, _read(scalars.volume_or_concentration)]
Tolerance = Annotated[Measure, _read(scalars.tolerance)]
PercentTolerance = Annotated[Measure, _read(scalars.percent_tolerance)]
Fraction = Annotated[float, _read(scalars.percentage)]
ConcentrationUnit = Annotated[str, _read(scalars.concentration_unit)]
Dilution = Annotated[float, _read(scalars.dilution)]

_ADDRESS = re.compile(r"^[^@\s<>,;\"]+@[^@\s<>,;\"]+$")


class Part(BaseModel):
    """A part of the settings: closed and unchangeable."""

    model_config = ConfigDict(extra="forbid", frozen=True, arbitrary_types_allowed=True)


def _limit_in(unit: str) -> BeforeValidator:
    """Convert a limit, or the keys warn and fail with one each, in the unit that the check is measured in."""

    def validate(value: object) -> object:
        texts = list(value.values()) if isinstance(value, dict) else [value]
        if not all(isinstance(text, str) for text in texts):
            raise ValueError(f"expected a limit, or the keys warn and fail with one each, got {got(value)}")
        limits = parse_check_limits(value)  # type: ignore[arg-type]
        for limit in (limits.warn, limits.fail):
            if limit is not None and limit.unit != unit:
                raise ValueError(f"expected a limit {f'in {unit}' if unit else 'without unit'}, got '{limit.text}'")
        return limits

    return BeforeValidator(validate)


PlainLimit = Annotated[CheckLimits | None, _limit_in("")]
PercentLimit = Annotated[CheckLimits | None, _limit_in("%")]
LoqLimit = Annotated[CheckLimits | None, _limit_in("LOQ")]


def _list_of_texts(value: object) -> object:
    """Let one text stand for a list of it."""
    return [value] if isinstance(value, str) else value


def _only_off(value: object) -> CheckLimits:
    """Take the one word that a check without number understands."""
    if value != "off":
        raise ValueError(f"expected off, which is all that this check understands, got {got(value)}")
    return parse_check_limits("off")


OnlyOff = Annotated[CheckLimits | None, BeforeValidator(_only_off)]


class SampleLimitsPart(Part):
    """Limits of the checks that judge a sample."""

    levels: PlainLimit = None
    slope_certainty: PlainLimit = None
    correlation: PlainLimit = None
    curvature: PlainLimit = None
    lack_of_fit: PlainLimit = None
    residual: PercentLimit = None
    addition_size: PlainLimit = None
    recovery: PercentLimit = None
    spike_size: PercentLimit = None
    matrix_effect: PercentLimit = None
    repeatability: PercentLimit = None
    duplicate: PercentLimit = None
    channels_agree: PlainLimit = None
    dilution_test: PercentLimit = None

    def stated(self) -> dict[str, CheckLimits]:
        """Return the checks that the laboratory states."""
        limits = {name: getattr(self, name) for name in type(self).model_fields}
        return {name: limit for name, limit in limits.items() if isinstance(limit, CheckLimits)}


class LimitsPart(SampleLimitsPart):
    """Limits of the checks; a bare limit is a fail limit, and stating a check replaces its default whole."""

    check_standard: PercentLimit = None
    bracket: OnlyOff = None
    blank: LoqLimit = None
    spiked_blank: PercentLimit = None


class ExceptionPart(SampleLimitsPart):
    """Limits for the samples that a pattern finds; what judges a whole batch cannot differ by sample."""

    samples: Annotated[re.Pattern[str], _read(scalars.pattern)]
    analytes: Annotated[tuple[str, ...], BeforeValidator(_list_of_texts)] = ()

    @model_validator(mode="after")
    def _some_limit(self) -> ExceptionPart:
        if not self.stated():
            raise ValueError("an exception without limit\nState for instance recovery: 60 to 140 %")
        return self


class Folders(Part):
    """Where exports come from, and where results and records go."""

    exports: Annotated[tuple[str, ...], BeforeValidator(_list_of_texts)] = Field(min_length=1)
    results: str = Field(min_length=1)
    records: str = "records"
    backup: str | None = None


class StockPart(Part):
    """A standard solution that additions are made from."""

    name: str = Field(min_length=1)
    contains: dict[str, Concentration] = Field(min_length=1)
    lot: str = ""
    from_: Annotated[float | None, _read(scalars.day_begins)] = Field(default=None, alias="from")
    until: Annotated[float | None, _read(scalars.day_ends)] = None
    tolerance: Annotated[float | None, _read(scalars.relative_tolerance)] = None
    uncertainty: Annotated[float | None, _read(scalars.relative_uncertainty)] = None

    @model_validator(mode="after")
    def _one_statement(self) -> StockPart:
        if self.tolerance is not None and self.uncertainty is not None:
            raise ValueError(
                f"stock '{self.name}' states tolerance and uncertainty\nKeep the one that its certificate gives"
            )
        if self.from_ is not None and self.until is not None and self.from_ > self.until:
            raise ValueError(f"stock '{self.name}' ends before it begins\nCorrect from or until")
        return self


class PreparationPart(Part):
    """Known scatter of whole preparations."""

    rsd: Fraction
    dof: Annotated[float, _read(scalars.number)] = Field(gt=0)


class TolerancesPart(Part):
    """Half-widths of volumes and factors."""

    aliquot: Tolerance | None = None
    spike_volume: Tolerance | None = None
    made_up_to: Tolerance | None = None
    predilution: Tolerance | None = None
    mass: PercentTolerance | None = None
    digest_volume: PercentTolerance | None = None


class PipettePart(Part):
    """Volumes that a pipette can be set to."""

    from_: Volume = Field(alias="from")
    to: Volume
    step: Volume

    @model_validator(mode="after")
    def _rises(self) -> PipettePart:
        low, high = (units.of_measure(each, "mL") for each in (self.from_, self.to))
        if low > high:
            raise ValueError(f"from {self.from_} is more than to {self.to}\nWrite the smaller volume first")
        return self


class BenchPart(Part):
    """How solutions are prepared."""

    aliquot: Volume | None = None
    made_up_to: Volume | None = None
    levels: dict[str, LevelAmount] = {}
    predilution: Dilution = 1.0
    tolerances: TolerancesPart = TolerancesPart()
    preparation: PreparationPart | None = None
    pipettes: list[PipettePart] = []

    @model_validator(mode="after")
    def _fits(self) -> BenchPart:
        if self.made_up_to is not None and self.aliquot is None:
            raise ValueError("made_up_to is stated and aliquot is not\nState both, or map them in the layout")
        return self


class AnalytePart(Part):
    """What holds for one analyte."""

    linear_to: Concentration | None = None
    proved_on: str = ""
    loq: Concentration | None = None
    lod: Concentration | None = None
    molar_mass: Annotated[float | None, _read(scalars.molar_mass)] = None
    limits: LimitsPart = LimitsPart()


class UnitsPart(Part):
    """Units of concentrations that state none, and of results."""

    export: ConcentrationUnit
    result: Annotated[str, _read(scalars.result_unit)]
    ppm: ConcentrationUnit | None = None
    ppb: ConcentrationUnit | None = None
    ppt: ConcentrationUnit | None = None

    def words(self) -> dict[str, str]:
        """Return what parts per million and the like mean, where that is declared."""
        stated = {word: getattr(self, word) for word in ("ppm", "ppb", "ppt")}
        return {word: unit for word, unit in stated.items() if unit is not None}


class ExpectPart(Part):
    """What a batch must hold."""

    spiked: Annotated[tuple[int, int] | None, _read(scalars.share)] = None
    levels: Annotated[int | None, _read(scalars.whole_number)] = None


def _week(read: Callable[[str], object]) -> Callable[[str], str]:
    """Check a text about days and times; the service reads it again where it is needed."""

    def convert(text: str) -> str:
        read(text)
        return text

    return convert


class SilencePart(Part):
    """When it is told that no export arrives."""

    after: Seconds = Field(gt=0)
    on: Annotated[str, _read(_week(week.hours))] = "Mon-Sun 00:00-24:00"


class WatchingPart(Part):
    """How the folders are watched."""

    settle: Seconds = Field(default=5.0, gt=0)
    scan: Seconds = Field(default=10.0, gt=0)
    subfolders: YesNo = False
    events: YesNo = True
    silence: SilencePart | None = None


class MailPart(Part):
    """Where mails go and how."""

    server: str = Field(min_length=1)
    from_: str = Field(alias="from")
    to: Annotated[tuple[str, ...], BeforeValidator(_list_of_texts)] = Field(min_length=1)
    port: Annotated[int | None, _read(lambda t: int(scalars.number(t)))] = Field(default=None, gt=0, lt=65536)
    security: Literal["starttls", "tls", "none"] = "starttls"
    user: str | None = None
    password_file: str | None = None
    ca_file: str | None = None
    about: tuple[Literal["fail", "incomplete", "problem", "cleared"], ...] = (
        "fail",
        "incomplete",
        "problem",
        "cleared",
    )
    daily: Annotated[str | None, _read(_week(week.daily))] = None
    password: None = None

    @field_validator("from_", "to")
    @classmethod
    def _addresses(cls, value: str | tuple[str, ...]) -> str | tuple[str, ...]:
        for address in [value] if isinstance(value, str) else value:
            if not _ADDRESS.match(address):
                raise ValueError(f"expected an address such as lead@example, got '{address}'")
        return value

    @field_validator("password", mode="before")
    @classmethod
    def _no_password(cls, _: object) -> None:
        raise ValueError(
            "a password never stands in this file\n"
            "Put it alone into a file that only the service's account can read, and name that in mail.password_file"
        )

    @model_validator(mode="after")
    def _sign_in_is_protected(self) -> MailPart:
        if self.security == "none" and self.user is not None:
            raise ValueError(
                "security: none is for servers without sign-in only\nState starttls or tls, or leave out user"
            )
        return self


def _keys_or_none(value: object) -> object:
    if not isinstance(value, (dict, MailPart)) and value != "none":
        raise ValueError(f"expected keys such as server, from and to, or none, got {got(value)}")
    return value


def _form_of_mail(value: object) -> str:
    """Tell which form was written, so that a fault in the keys is not reported as a missing word as well."""
    return "none" if value == "none" else "keys"


Mailing = Annotated[
    Annotated[MailPart, Tag("keys")] | Annotated[Literal["none"], Tag("none")],
    Discriminator(_form_of_mail),
    BeforeValidator(_keys_or_none),
]


class CsvPart(Part):
    """For spreadsheets that expect a decimal comma."""

    separator: Literal[",", ";", "\t"] = ","
    decimal: Literal[".", ","] = "."

    @model_validator(mode="after")
    def _differ(self) -> CsvPart:
        if self.separator == self.decimal:
            raise ValueError("separator and decimal mark must differ\nWith decimal ',' state separator ';'")
        return self


class VariancePart(Part):
    """A variance model other than the safe one, with the evidence that it holds."""

    model: Literal["constant", "proportional", "counting"]
    evidence: str = Field(min_length=1)


def _variance(value: object) -> object:
    if value in ("proportional", "counting"):
        raise ValueError(
            f"expected the evidence that the scatter is {value}: a wrong model covers as little as 45 %\n"
            f"Write variance: {{model: {value}, evidence: 'where it was shown'}}"
        )
    return {"model": value, "evidence": "the safe default"} if value == "constant" else value


Variance = Annotated[VariancePart, BeforeValidator(_variance)]


class Decisions(Part):
    """What the laboratory decides, and a layout may decide again for its own exports."""

    stocks: tuple[StockPart, ...] | None = None
    bench: BenchPart | None = None
    limits: LimitsPart = LimitsPart()
    report: Literal["additions", "calibration", "automatic"] | None = None
    blank: Literal["subtract", "preparation", "none"] | None = None
    variance: Variance | None = None
    added_refers_to: Literal["vessel", "aliquot", "nominal"] | None = None
    concentration_refers_to: Literal["vessel", "sample"] | None = None
    reference: Literal["per vessel", "diluted with the sample"] | None = None
    spiked_at: Literal["before preparation", "after preparation"] | None = None
    expect: ExpectPart | None = None


class SettingsFile(Decisions):
    """The whole of `config.yaml`."""

    laboratory: str = Field(min_length=1)
    folders: Folders
    layouts: tuple[str, ...] = Field(min_length=1)
    report: Literal["additions", "calibration", "automatic"]
    units: UnitsPart
    mail: Mailing
    analytes: dict[str, AnalytePart] = {}
    confidence: Annotated[float, _read(scalars.percentage)] = Field(default=0.95, gt=0.5, lt=1)
    coverage: Annotated[float | None, _read(scalars.coverage)] = None
    undetected_native: Literal["as measured", "as zero"] = "as measured"
    exceptions: tuple[ExceptionPart, ...] = ()
    repeats: Literal["new attempt", "same series", "refuse"] = "new attempt"
    pair_within: Annotated[float, _read(scalars.span)] = 0.0
    calibration_within: Annotated[float, _read(scalars.span)] = 0.0
    complete_after: Seconds = 7200.0
    watching: WatchingPart = WatchingPart()
    adoption: Literal["automatic", "signed"] = "automatic"
    csv: CsvPart = CsvPart()
