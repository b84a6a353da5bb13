"""The portfolio file: its keys, their types and ranges, and what is said when one is wrong.

Keys are those of the Python surface with hyphens. An unknown key stops the run and names its nearest
match; a value out of range names the key, what is allowed and what was seen.
"""

from __future__ import annotations

import difflib
import tomllib
from datetime import date, timedelta
from pathlib import Path
from typing import Annotated, Any, Literal, get_args

from pydantic import BaseModel, ConfigDict, Field, ValidationError, field_validator, model_validator
from pydantic.fields import FieldInfo

from lossagg.errors import InputError, place
from lossagg.portfolio.control_sections import ControlKeys
from lossagg.portfolio.dependence_sections import DependenceSection
from lossagg.portfolio.preparing import PreparingKeys
from lossagg.portfolio.pricing_sections import OptionGrid, OptionSection, PricingSection
from lossagg.portfolio.prior import UPPER_BOUND, PriorSection
from lossagg.portfolio.sections import Amount, Name, Positive, Probability, Section, Terms, hyphenated
from lossagg.portfolio.tower_sections import TowerSection


class PortfolioSection(Section):
    """`[portfolio]`: what the portfolio is and at which levels it is reported."""

    name: Name
    currency: Annotated[str, Field(pattern="^[A-Z]{3}$")]
    valuation_date: date
    levels: Annotated[tuple[Probability, ...], Field(min_length=1, strict=False)] = (
        0.9,
        0.95,
        0.99,
        0.995,
        0.999,
    )
    capital_level: Probability = 0.995
    description: str | None = None
    forecast_start: date | None = None
    tolerance: Annotated[float, Field(ge=0, lt=1)] = 0.05
    rates: str | None = None
    rates_columns: dict[str, str] = Field(default_factory=dict)

    @field_validator("levels")
    @classmethod
    def _ascending(cls, levels: tuple[float, ...]) -> tuple[float, ...]:
        if list(levels) != sorted(set(levels)):
            raise ValueError("levels must increase | List them from the lowest to the highest, each once.")
        return levels

    @property
    def forecast(self) -> tuple[date, date]:
        """First and last day of the year that is forecast."""
        start = self.forecast_start or self.valuation_date + timedelta(days=1)
        try:
            end = start.replace(year=start.year + 1)
        except ValueError:  # 29 February
            end = start.replace(year=start.year + 1, day=28)
        return start, end - timedelta(days=1)


class Law(Section):
    """A law given by family and parameters, or families to be fitted to the records.

    Of several fitted families the one of lowest AIC is used; `choose` names another, and `reason` says why.
    `source` says where a given law comes from; a line without losses of its own must say it.
    """

    model_config = ConfigDict(alias_generator=hyphenated, extra="allow", strict=True, frozen=True)

    family: str | None = None
    fit: Annotated[tuple[str, ...], Field(min_length=1, strict=False)] | None = None
    choose: str | None = None
    reason: Annotated[str, Field(min_length=1)] | None = None
    source: Annotated[str, Field(min_length=1)] | None = None

    @model_validator(mode="after")
    def _choice_of_a_fit(self) -> Law:
        if self.choose is not None and self.choose not in (self.fit or ()):
            raise ValueError(
                f"choose names {self.choose!r}, which is not in fit | Choose one of the fit's families."
            )
        if self.reason is not None and self.choose is None:
            raise ValueError("reason belongs to choose | Name the family it speaks for, or leave it out.")
        return self

    @model_validator(mode="after")
    def _one_of_two(self) -> Law:
        if (self.family is None) == (self.fit is None):
            raise ValueError(
                "a law needs either a family or a fit | "
                'Write family = "..." with its parameters, or fit = ["...", ...].'
            )
        if self.fit is not None and self.source is not None:
            raise ValueError(
                "source belongs to a given law | The source of a fit is the records; leave it out."
            )
        if self.fit is not None and self.given:
            raise ValueError(
                f"unknown key {next(iter(self.given))!r} beside fit | A fit takes no parameters."
            )
        return self

    @property
    def given(self) -> dict[str, Any]:
        """The parameters, by name with underscores."""
        return {key.replace("-", "_"): value for key, value in (self.model_extra or {}).items()}


class Frequency(Law):
    """The frequency of a line; a fit may weigh its rate against a prior.

    Without a loss and without a prior a fit has the one-sided 95 % upper bound of the rate, or the mean of
    its posterior law, as `rate-without-losses` says.
    """

    prior: PriorSection | None = None
    rate_without_losses: Literal["upper-bound", "posterior-mean"] = UPPER_BOUND

    @model_validator(mode="after")
    def _prior_belongs_to_a_fit(self) -> Frequency:
        if self.prior is not None and self.fit is None:
            raise ValueError(
                "prior belongs to a fit | A given law is a judgement already; leave out the prior, or write "
                'fit = ["..."].'
            )
        if "rate_without_losses" in self.model_fields_set and (self.fit is None or self.prior is not None):
            raise ValueError(
                "rate-without-losses belongs to a fit without a prior | Leave it out; a given law or a prior "
                "says what the rate is without losses."
            )
        return self


class Severity(Law):
    """The severity of a line; a fit may splice a generalized Pareto tail above a threshold, without a jump of
    the density where `continuous`."""

    tail_threshold: Positive | None = None
    continuous: bool = False

    @model_validator(mode="after")
    def _tail_belongs_to_a_fit(self) -> Severity:
        if self.continuous and self.tail_threshold is None:
            raise ValueError("continuous belongs to a tail-threshold | State the threshold, or leave it out.")
        if self.tail_threshold is not None and self.fit is None:
            raise ValueError('tail-threshold belongs to a fit | For given parameters use family = "spliced".')
        return self


class FileOptions(Section):
    """How a file of records or exposures is written."""

    columns: dict[str, str] = Field(default_factory=dict)
    sheet: str | None = None
    delimiter: Annotated[str, Field(min_length=1, max_length=1)] | None = None
    encoding: str | None = None
    decimal: Annotated[str, Field(pattern="^[.,]$")] = "."
    thousands: Annotated[str, Field(min_length=1, max_length=1)] | None = None
    grouping: Literal["three", "indian"] = "three"
    date_format: str | None = None
    time_zone: str | None = None


class LineSection(FileOptions, PreparingKeys, ControlKeys):
    """`[[line]]`: one class of business, from records or from given laws.

    Without `forecast-exposure` the forecast year has the exposure of the last year, that of the whole year
    also where it was observed in part. `without-losses` declares that there was none in the years observed,
    in place of records or beside records that have headings only.
    """

    name: Name
    records: str | None = None
    without_losses: bool = False
    exposure: str | None = None
    exposure_columns: dict[str, str] = Field(default_factory=dict)
    reporting_threshold: Amount | None = None
    trend: Annotated[float, Field(gt=-0.5, lt=1.0)] = 0.0
    first_year: Annotated[int, Field(ge=1900, le=2200)] | None = None
    forecast_exposure: Positive | None = None
    expense: Annotated[float, Field(ge=0, le=1)] = 0.0
    sum_insured: Positive | None = None
    frequency: Frequency
    severity: Severity

    @property
    def lowest_recorded(self) -> float | None:
        """Threshold, from the ground up, of losses that carry none: also what the amounts are net of."""
        if self.deductible is None:
            return self.reporting_threshold
        return max(self.reporting_threshold or 0.0, self.deductible)

    @property
    def observed(self) -> bool:
        """Whether years of the line were observed: it has records, or is declared to be without losses."""
        return self.records is not None or self.without_losses

    @model_validator(mode="after")
    def _fit_needs_records(self) -> LineSection:
        if self.without_losses and self.records is None and self.exposure is None and self.first_year is None:
            raise ValueError(
                "without-losses needs the years in which there was none | Add exposure = ... or "
                "first-year = ..."
            )
        if not self.observed:
            for part, law in (("frequency", self.frequency), ("severity", self.severity)):
                if law.fit is not None:
                    raise ValueError(
                        f"{part} is to be fitted, but the line has no records | Add records = ..., or "
                        "without-losses = true if there was no loss."
                    )
            if self.exposure is not None:
                raise ValueError("an exposure file needs records beside it | Add records = ...")
        return self


class CoverSection(Terms):
    """`[[cover]]`: terms under which someone pays part of the losses."""

    name: Name
    lines: Annotated[tuple[str, ...], Field(min_length=1, strict=False)] | None = None
    after: Annotated[tuple[str, ...], Field(strict=False)] = ()


class PortfolioFile(Section):
    """The whole portfolio file."""

    portfolio: PortfolioSection
    columns: dict[str, str] = Field(default_factory=dict)
    line: Annotated[tuple[LineSection, ...], Field(min_length=1, strict=False)]
    cover: Annotated[tuple[CoverSection, ...], Field(strict=False)] = ()
    tower: Annotated[tuple[TowerSection, ...], Field(strict=False)] = ()
    dependence: Annotated[tuple[DependenceSection, ...], Field(strict=False)] = ()
    pricing: PricingSection = PricingSection()
    option: Annotated[tuple[OptionSection, ...], Field(strict=False)] = ()
    option_grid: OptionGrid | None = None


def read_portfolio_file(path: Path) -> PortfolioFile:
    """Read and check a portfolio file.

    Args:
        path: the TOML file.

    Raises:
        InputError: the file is missing or is not TOML, a key is unknown or missing, or a value is out
            of range; all faults of the file are listed at once.
    """
    try:
        content = tomllib.loads(path.read_text(encoding="utf-8-sig"))
    except FileNotFoundError as error:
        raise InputError(
            "there is no portfolio file",
            where=place(file=path.name),
            remedy="Name a folder that holds portfolio.toml.",
        ) from error
    except UnicodeDecodeError as error:
        raise InputError(
            f"the portfolio file is not UTF-8 at byte {error.start}",
            where=place(file=path.name),
            remedy="Save it as UTF-8.",
        ) from error
    except tomllib.TOMLDecodeError as error:
        raise InputError(
            f"the portfolio file is not valid TOML: {error}",
            where=place(file=path.name),
            remedy="Repair that line.",
        ) from error
    try:
        return PortfolioFile.model_validate(content)
    except ValidationError as error:
        raise _all_faults([_fault(detail) for detail in _own_faults(error)], path.name) from error


def _all_faults(faults: list[tuple[str, str, object, str]], file: str) -> InputError:
    key, what, value, remedy = faults[0]
    others = "".join(f"\n  also {other_key}: {other_what}." for other_key, other_what, _, _ in faults[1:])
    return InputError(what, where=place(file=file, key=key), value=value, remedy=remedy + others)


def _own_faults(error: ValidationError) -> list[Any]:
    """The faults found, less "too short" of a list whose items have faults of their own."""
    details = error.errors()
    return [
        detail
        for detail in details
        if detail["type"] != "too_short"
        or not any(
            len(d["loc"]) > len(detail["loc"]) and d["loc"][: len(detail["loc"])] == detail["loc"]
            for d in details
        )
    ]


def _fault(detail: Any) -> tuple[str, str, object, str]:
    """(key, what, value seen, remedy) of one fault found by the schema."""
    location = detail["loc"]
    key, kind, value = _key(location), detail["type"], detail["input"]
    if kind == "extra_forbidden":
        return key, "unknown key", str(location[-1]), _nearest(str(location[-1]), _known_keys(location))
    if kind == "missing":
        return key, "missing key", "nothing", f"Add {location[-1]} = ..."
    if kind == "value_error":
        what, _, remedy = str(detail["ctx"]["error"]).partition(" | ")
        return key, what, _named(value), remedy
    seen = _named(value)
    return key, detail["msg"][0].lower() + detail["msg"][1:], seen, _range_remedy(key, value)


def _range_remedy(key: str, value: object) -> str:
    last = key.rsplit(".", 1)[-1]
    percent = any(word in last for word in ("level", "share", "expense"))
    if isinstance(value, int | float) and 1 < value < 100 and percent:
        return f"Write {value / 100:g} for {value:g} %."
    if isinstance(value, str) and value.replace(".", "").replace(",", "").isdigit():
        return f"Write the number without quotes: {last} = {value}."
    return "Give a value in that range."


def _named(value: object) -> object:
    if isinstance(value, dict):
        return value.get("name", "a table")
    return "a list" if isinstance(value, list | tuple) else value


def _key(location: tuple[int | str, ...]) -> str:
    """`line[2].frequency.mean`, counting tables from 1 as a reader does."""
    text = ""
    for part in location:
        text += f"[{part + 1}]" if isinstance(part, int) else f".{part}" if text else part
    return text


def _known_keys(location: tuple[int | str, ...]) -> list[str]:
    """Keys allowed in the table in which an unknown one was found."""
    model: type[BaseModel] = PortfolioFile
    for part in location[:-1]:
        if isinstance(part, str):
            field = next(f for f in model.model_fields.values() if f.alias == part)
            model = _model_of(field)
    return [field.alias or "" for field in model.model_fields.values()]


def _model_of(field: FieldInfo) -> type[BaseModel]:
    annotation: Any = field.annotation
    while not (isinstance(annotation, type) and issubclass(annotation, BaseModel)):
        annotation = get_args(annotation)[0]
    return annotation


def _nearest(word: str, known: list[str]) -> str:
    close = difflib.get_close_matches(word, known, n=1, cutoff=0.5)
    return f"Did you mean {close[0]!r}?" if close else f"Keys here: {', '.join(known)}."
