"""The frozen records a study file is turned into. `study.py` checks every value once; nothing checks again."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from pathlib import Path
from typing import Literal, get_args

from carrylab.data.calendar import Interval, Tenor

Kind = Literal["bonds", "currencies", "equities", "columns"]
Effects = Literal["none", "entity", "time", "both"]
By = Literal["pooled", "maturity", "economy", "currency", "index", "entity"]
Unit = Literal["percent", "decimal", "basis points"]
Compounding = Literal[
    "continuous", "annual", "semi-annual", "quarterly", "monthly", "simple", "discount", "discount factor"
]
DayCount = Literal["act/360", "act/365f", "30/360", "30e/360", "act/act"]
Timing = Literal["end", "average"]
Quote = Literal["home per foreign", "foreign per home", "pair", "points"]
Basis = Literal["trailing 12 months", "per period"]
MissingMaturity = Literal["exact", "linear in yield", "flat forward", "cubic in yield"]
MissingTenor = Literal["exact", "linear in rate", "nearest"]
EquityCurrency = Literal["local", "home unhedged", "home hedged"]
Errors = Literal[
    "auto",
    "classical",
    "robust",
    "bartlett",
    "bartlett, fixed-b",
    "rectangular",
    "cosine",
    "one-period",
    "instrument",
    "instrument, cosine",
    "clustered: entity",
    "clustered: date",
    "clustered: both",
    "clustered: both, lagged",
]
Factor = Literal["none", "n/(n-k)", "clusters", "clusters, one factor"]
Reference = Literal["normal", "t"]
Joint = Literal["auto", "cosine", "bartlett"]
Role = Literal["return", "fundamental", "carried over", "approximation", "other"]

PARITIES: dict[str, tuple[str, ...]] = {
    "bonds": ("forward-spot", "forward-spot-far", "yield-spread", "yield-spread-to-maturity", "carry"),
    "currencies": ("uncovered-interest", "forward-discount", "carry"),
    "equities": ("dividend-price", "carry"),
    "columns": ("columns",),
}
ERRORS: tuple[str, ...] = get_args(Errors)


@dataclass(frozen=True, slots=True)
class Source:
    """One data file as declared: where it is, what it holds and in which units.

    `role` is the key in `[market.data]`, or the name of a control. `file` is the path as written, `path` the
    same made absolute. Codes: `day_count` and `scale` map a currency, economy or pair to its value, with
    "others" for all that are not named. `constants` hold a key column that is one value for the whole file
    (`economy = "QM"`). `columns` maps a name in the file to the word or key it stands for. `spread` names the
    key that runs along the columns of a wide file; `pattern` is a regular expression whose named groups read
    keys from wide column names.
    """

    role: str
    path: Path
    file: str
    unit: Unit = "decimal"
    compounding: Compounding = "continuous"
    day_count: Mapping[str, DayCount] = field(default_factory=dict)
    timing: Timing = "end"
    quote: Quote | None = None
    scale: Mapping[str, float] = field(default_factory=dict)
    tenor: Tenor | None = None
    constants: Mapping[str, str] = field(default_factory=dict)
    spread: str | None = None
    columns: Mapping[str, str] = field(default_factory=dict)
    pattern: str | None = None
    date_order: Literal["ymd", "dmy", "mdy"] | None = None
    decimal: Literal[".", ","] = "."
    separator: str | None = None
    encoding: str = "utf-8"
    missing: tuple[str, ...] = ()
    known_after: Tenor | None = None
    basis: Basis = "trailing 12 months"


@dataclass(frozen=True, slots=True)
class LegColumn:
    """A leg the user has already built: its column, weight, null slope and role, and its one-period outcomes."""

    name: str
    column: str
    weight: float | None = None
    null: float | None = None
    role: Role = "other"
    one_step: str | None = None


@dataclass(frozen=True, slots=True)
class PanelColumns:
    """The columns of a `columns` market: entity, signal, controls and legs, each row at its origin date."""

    entity: str | None
    signal: str
    legs: tuple[LegColumn, ...]
    controls: tuple[str, ...] = ()


@dataclass(frozen=True, slots=True)
class Survey:
    """A survey expectation of one fundamental leg over one horizon.

    `growth`: the file gives a simple growth over the horizon, R, which becomes ln(1 + R); else a value in the unit of
    the leg. The source's unit makes either a decimal.
    """

    leg: str
    horizon: Tenor
    source: Source
    growth: bool = False


@dataclass(frozen=True, slots=True)
class Inference:
    """How standard errors are made. `lags` and `factor` of None mean the stated rule of the error kind.

    `draws` under the null: None makes as many as a printed p-value needs in a market where the automatic choice of
    errors calls for them, and none elsewhere; 0 means none. `joint` is the covariance of joint tests.
    """

    errors: Errors = "auto"
    lags: int | None = None
    factor: Factor | None = None
    reference: Reference | None = None
    confidence: float = 0.95
    draws: int | None = None
    joint: Joint = "auto"
    seed: int = 7


@dataclass(frozen=True, slots=True)
class Market:
    """One market of a study: its data, parities, horizons and inference."""

    name: str
    kind: Kind
    parities: tuple[str, ...]
    horizons: tuple[Tenor, ...]
    interval: Interval
    home: str | None
    inference: Inference
    sources: Mapping[str, tuple[Source, ...]]
    controls: tuple[Source, ...] = ()
    surveys: tuple[Survey, ...] = ()
    panel: PanelColumns | None = None
    first: str | None = None
    last: str | None = None
    maturities: tuple[Tenor, ...] = ()
    by: By = "pooled"
    effects: Effects = "entity"
    missing_maturity: MissingMaturity = "exact"
    missing_tenor: MissingTenor = "exact"
    short: Tenor | None = None
    rho: float | None = None
    tolerance: float | None = None
    currency: EquityCurrency = "local"
    max_gap: int | None = None
    pegs: tuple[str, ...] = ()
    offshore: tuple[str, ...] = ()
    leave_out: tuple[str, ...] = ()
    index_economy: Mapping[str, str] = field(default_factory=dict)


@dataclass(frozen=True, slots=True)
class Profile:
    """Every horizon from one `every` (None: one step) to `until`; `common_sample`: origins that all of them share."""

    until: Tenor
    every: Tenor | None = None
    common_sample: bool = False


@dataclass(frozen=True, slots=True)
class Windows:
    """Lengths of rolling windows and of the first expanding window, None for none; a window ends each `every`."""

    rolling: Tenor | None = None
    expanding: Tenor | None = None
    every: Tenor | None = None


@dataclass(frozen=True, slots=True)
class Breaks:
    """One unknown break of the slope: the share of dates at either end in which none is looked for."""

    trim: float = 0.15


@dataclass(frozen=True, slots=True)
class Forecast:
    """Out of sample: length of the first training sample, of a rolling one (None: recursive only), risk aversion."""

    first: Tenor
    rolling: Tenor | None = None
    risk_aversion: float = 3.0


@dataclass(frozen=True, slots=True)
class Rule:
    """A series above or below a mark: zero, its mean, or its quantile (a number between 0 and 1)."""

    series: str
    side: Literal["above", "below"]
    mark: Literal["zero", "mean"] | float


@dataclass(frozen=True, slots=True)
class State:
    """A labelled series by date from a file, or a `rule` over a series; `known` false where it is dated afterwards."""

    name: str
    source: Source | None = None
    rule: Rule | None = None
    known: bool = True


@dataclass(frozen=True, slots=True)
class Period:
    """A named subsample of origins, both ends included."""

    name: str
    first: str | None = None
    last: str | None = None


@dataclass(frozen=True, slots=True)
class Questions:
    """What a study asks beyond the headline; empty where it asks nothing more.

    `years`: leave each year out in turn. `parts`: the slope's static, dynamic and common parts. `across`: signals of
    each market against the returns of all. `components`: principal components of the curve beside the signal.
    """

    horizons: Profile | None = None
    windows: Windows | None = None
    breaks: Breaks | None = None
    forecast: Forecast | None = None
    years: bool = False
    parts: bool = False
    across: bool = False
    components: int | None = None
    states: tuple[State, ...] = ()
    periods: tuple[Period, ...] = ()


@dataclass(frozen=True, slots=True)
class Study:
    """A whole study file, checked. `economies` maps an economy to its currency; `text` is the file as read."""

    path: Path
    text: str
    title: str
    home: str | None
    economies: Mapping[str, str]
    markets: tuple[Market, ...]
    questions: Questions = Questions()
