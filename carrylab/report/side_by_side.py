"""The answer a reader sees first: one column a market, shares above, tests and sample beneath."""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass

import pandas as pd

from carrylab.report.numbers import digits_of
from carrylab.report.table import (
    Cell,
    Line,
    Table,
    count_cell,
    doubts,
    error_cell,
    interval_cell,
    number_cell,
    p_cell,
    percent_cell,
    word_cell,
)

ROLE_WORDS = {
    "return": "paid as excess return",
    "fundamental": "comes true in the fundamental",
    "carried over": "still in the price",
    "approximation": "approximation error",
}
SECTIONS = ("shares", "summary", "warning", "draws", "other methods")
CHOSEN = "; chosen because"
STANDING = (
    "Slopes speak of variation in the spread: entity effects absorb standing premia, which the levels show instead."
)


@dataclass(frozen=True, eq=False, slots=True)
class Column:
    """All pooled findings of one market, parity and horizon."""

    market: str
    parity: str
    horizon: str
    rows: pd.DataFrame

    def find(self, term: str, *, section: str = "shares", rank: str = "headline", role: str = "") -> pd.DataFrame:
        """Rows of one term."""
        rows = self.rows
        keep = (rows["section"] == section) & (rows["term"] == term) & (rows["sample"] == "all")
        if section == "shares":
            keep &= rows["rank"] == rank
        if role:
            keep &= rows["role"] == role
        return rows[keep]

    def number(self, term: str, field: str = "estimate", *, section: str = "shares", rank: str = "headline") -> float:
        """One number, NaN where the column has none."""
        found = self.find(term, section=section, rank=rank)
        return float(found[field].iloc[0]) if len(found) else math.nan

    def text(self, term: str, field: str, *, section: str = "shares") -> str:
        """One text, empty where the column has none."""
        found = self.find(term, section=section)
        return str(found[field].iloc[0]) if len(found) else ""


def columns_of(findings: pd.DataFrame, parity: str | None = None) -> list[Column]:
    """One column a market: the named parity, or each market's first, at the horizon most markets share."""
    pooled = findings[
        (findings["group"] == "pooled")
        & findings["section"].isin(["shares", "summary", "warning", "draws", "other methods"])
    ]
    shares = pooled[pooled["section"] == "shares"]
    first = shares.drop_duplicates("market").set_index("market")["parity"]
    wanted = {market: parity or own for market, own in first.items()}
    there = shares[shares["parity"] == shares["market"].map(wanted)]
    pairs = there[["market", "horizon"]].drop_duplicates()
    common = pairs["horizon"].value_counts(sort=False)
    found = []
    for market, own in pairs.groupby("market", sort=False):
        horizon = max(own["horizon"], key=lambda name: int(common[name]))
        keep = (pooled["market"] == market) & (pooled["parity"] == wanted[market]) & (pooled["horizon"] == horizon)
        found.append(Column(str(market), wanted[market], horizon, pooled[keep]))
    return found


def side_by_side(findings: pd.DataFrame, *, title: str = "", parity: str | None = None) -> Table | None:
    """The table of all markets, or None where no market has the parity."""
    columns = columns_of(findings, parity)
    if not columns:
        return None
    lines = [*_head(columns), *_shares(columns), *_tests(columns), *_levels(columns), *_sample(columns)]
    return Table(
        title="\n".join(line for line in (title, *_caveat(columns)) if line),
        head=tuple(column.market for column in columns),
        lines=tuple(lines),
        notes=_notes(columns),
    )


def _differing(columns: list[Column]) -> list[str]:
    """What is not the same in all columns."""
    first = {name: {str(column.rows.iloc[0][name]) for column in columns} for name in ("horizon", "interval")}
    return [f"{name}s" for name, seen in first.items() if len(seen) > 1]


def _caveat(columns: list[Column]) -> list[str]:
    """The line under the title where columns are not alike."""
    differing = _differing(columns)
    samples = [] if len({_span(column) for column in columns}) == 1 else ["samples"]
    if not differing + samples:
        return []
    *most, last = [*differing, *samples]
    said = f"{', '.join(most)} and {last}" if most else last
    end = ", so no test across markets is given." if differing else "."
    return [f"{said.capitalize()} differ between the columns{end}"]


def _span(column: Column) -> str:
    row = column.rows.iloc[0]
    return f"{row['first']} to {row['last']}"


def _line(label: str, columns: list[Column], cell: Callable[[Column], Cell]) -> Line:
    return Line(label, tuple(cell(column) for column in columns))


def _head(columns: list[Column]) -> list[Line]:
    return [
        _line("signal", columns, lambda c: word_cell(c.text("mean signal", "leg", section="summary"))),
        _line("parity", columns, lambda c: word_cell(c.parity)),
        _line("horizon", columns, lambda c: word_cell(f"{c.horizon}, by {c.rows.iloc[0]['interval']}")),
        _line("origins", columns, lambda c: word_cell(_span(c))),
    ]


def _shares(columns: list[Column]) -> list[Line]:
    lines = [Line("Share of the spread", heading=True)]
    for role, words in ROLE_WORDS.items():
        lines += _share_lines(columns, role, words)
        lines += _other_slopes(columns) if role == "return" else []
    lines.append(_line("sum", columns, lambda c: number_cell(c.number("sum of shares"), 3)))
    lines.append(_line("resolved premium share", columns, lambda c: number_cell(c.number("resolved premium share"))))
    lines.append(_line("", columns, _resolved_error))
    return lines


def _share_lines(columns: list[Column], role: str, words: str) -> list[Line]:
    found = [share_of(column, role) for column in columns]
    return [
        Line(words, tuple(number_cell(share, _digits(error)) for share, error in found)),
        Line("", tuple(error_cell(error, _digits(error)) for _, error in found)),
        _line("  R2", columns, lambda c: number_cell(_r2(c, role), 3)),
    ]


def _other_slopes(columns: list[Column]) -> list[Line]:
    """The share paid by the instrument, and with what draws say of its bias taken out; nothing where there is none."""

    def instrument(field: str) -> Callable[[Column], float]:
        return lambda c: c.number("IVX instrument", field, section="other methods")

    value, error = instrument("estimate"), instrument("std_error")
    return [
        _line("  by the IVX instrument", columns, lambda c: number_cell(value(c))),
        _line("", columns, lambda c: error_cell(error(c))),
        _line(
            "  least squares, bias out",
            columns,
            lambda c: number_cell(c.number("bias-corrected slope", section="draws")),
        ),
    ]


def share_of(column: Column, role: str) -> tuple[float, float]:
    """Share of one role and its error; several fundamental legs are taken together."""
    rows = column.find("signal", role=role)
    if len(rows) == 1 and not math.isnan(rows["weight"].iloc[0]):
        return float(rows["share"].iloc[0]), float(abs(rows["weight"].iloc[0]) * rows["std_error"].iloc[0])
    if len(rows) > 1 and role == "fundamental":
        return column.number("all paid"), column.number("all paid", "std_error")
    return math.nan, math.nan


def _digits(error: float) -> int:
    """Decimals of a share: one more than usual where its error would print as zero."""
    return min(digits_of(error), 3)


def _r2(column: Column, role: str) -> float:
    rows = column.find("signal", role=role)
    return float(rows["r2"].iloc[0]) if len(rows) == 1 and role in ("return", "fundamental") else math.nan


def _resolved_error(column: Column) -> Cell:
    """A ratio's interval, else the error."""
    row = column.find("resolved premium share")
    if not len(row):
        return Cell()
    if row["note"].iloc[0].startswith("interval"):
        return interval_cell(float(row["lower"].iloc[0]), float(row["upper"].iloc[0]))
    return error_cell(float(row["std_error"].iloc[0]))


def _tests(columns: list[Column]) -> list[Line]:
    return [
        Line("p-value of the hypothesis", heading=True),
        _line("nothing is paid", columns, lambda c: p_of(c.find("nothing paid"))),
        _line("  second opinion", columns, lambda c: p_of(c.find("nothing paid", rank="second opinion"))),
        _line("  by draws", columns, _beside),
        _line("  at 5%, a premium is", columns, verdict_of),
        _line("all is paid", columns, lambda c: p_of(c.find("all paid"))),
        _line("  by draws", columns, lambda c: p_of(c.find("all paid", section="draws"))),
        _line(
            "size of 1B from bias, %",
            columns,
            lambda c: percent_cell(c.number("predicted size", section="summary"), 0),
        ),
        *_by_chance(columns),
    ]


def p_of(found: pd.DataFrame) -> Cell:
    """The p-value of one finding, marked where it is in doubt."""
    return p_cell(float(found["p_value"].iloc[0]), str(found["note"].iloc[0])) if len(found) else p_cell(math.nan)


def _beside(column: Column) -> Cell:
    """The p-value of draws under the null where they are neither the headline nor the second opinion."""
    found, ranked = column.find("nothing paid", section="draws"), ("headline", "second opinion")
    drawn = [str(method) for method in found["method"]]
    shown = [str(text) for rank in ranked for text in column.find("nothing paid", rank=rank)["method"]]
    return Cell() if any(words in text for words in drawn for text in shown) or found.empty else p_of(found)


def verdict_of(column: Column) -> Cell:
    """What the headline and the second opinion say together: firm only where both agree and neither is in doubt."""
    found = [p_of(column.find("nothing paid", rank=rank)) for rank in ("headline", "second opinion")]
    known = [cell for cell in found if not math.isnan(cell.value)]
    if len(known) < 2:
        return Cell()
    below = sum(cell.value < 0.05 for cell in known)
    doubtful = below == 2 and any(cell.text.endswith("?") for cell in known)
    return word_cell(("not seen", "in doubt", "firm")[below - doubtful])


def _by_chance(columns: list[Column]) -> list[Line]:
    """What chance alone gives in draws under the null; nothing where there were none."""
    return [
        _line("R2 by chance, 95%", columns, lambda c: number_cell(c.number("R2 by chance", section="draws"), 3)),
    ]


def _levels(columns: list[Column]) -> list[Line]:
    def summary(term: str, field: str = "estimate") -> Callable[[Column], float]:
        return lambda c: c.number(term, field, section="summary")

    def of_signal(column: Column, term: str) -> Cell:
        value = summary(term)(column)
        return number_cell(value) if _is_ratio(column) else _level(column, value)

    mean, error, level = (
        summary("mean excess return"),
        summary("mean excess return", "std_error"),
        summary("level share"),
    )
    return [
        Line("Levels over the horizon", heading=True),
        _line("mean signal", columns, lambda c: of_signal(c, "mean signal")),
        _line("mean excess return", columns, lambda c: _level(c, mean(c))),
        _line("", columns, lambda c: error_cell(error(c), scale=1 if c.parity == "columns" else 100)),
        _line("constant", columns, lambda c: _level(c, _constant(c))),
        _line("sd of the signal, effects out", columns, lambda c: of_signal(c, "signal sd within")),
        _line("mean return / mean signal", columns, lambda c: number_cell(math.nan if _is_ratio(c) else level(c))),
    ]


def _level(column: Column, value: float) -> Cell:
    """A level in percent; a column of the user's own stays in its unit."""
    return number_cell(value) if column.parity == "columns" else percent_cell(value)


def _constant(column: Column) -> float:
    """Constant of the return leg, NaN where there is none."""
    found = column.find("const", role="return")
    return float(found["estimate"].iloc[0]) if len(found) else math.nan


def _is_ratio(column: Column) -> bool:
    return bool((column.rows["role"] == "carried over").any())


def _sample(columns: list[Column]) -> list[Line]:
    def count_of(field: str) -> Callable[[Column], Cell]:
        return lambda c: count_cell(float(c.rows[field].iloc[0]))

    def summary(term: str) -> Callable[[Column], Cell]:
        return lambda c: number_cell(c.number(term, section="summary"), 1)

    return [
        Line("Sample", heading=True),
        _line("observations", columns, count_of("n_obs")),
        _line("dates", columns, count_of("n_dates")),
        _line("independent windows", columns, summary("independent windows")),
        _line("entities", columns, count_of("n_entities")),
        _line("effective entities", columns, summary("effective entities")),
    ]


def comparison_table(findings: pd.DataFrame, parity: str | None = None) -> Table | None:
    """Differences of the resolved premium shares with intervals, then the joint p; None where nothing compares."""
    columns = columns_of(findings, parity)
    joint = findings[(findings["section"] == "joint") & (findings["group"] == "pooled")]
    joint = joint[joint["parity"] == (parity or "each market's own spread")]
    joint = joint[joint["horizon"].isin([column.horizon for column in columns])]
    if _differing(columns) or joint.empty:
        return None
    lines = [
        Line(
            str(row["term"]),
            (number_cell(row["estimate"]), interval_cell(row["lower"], row["upper"]), p_cell(row["p_value"])),
        )
        for row in joint.to_dict("records")
    ]
    methods = "; ".join(dict.fromkeys(joint["method"]))
    return Table(
        title=f"Resolved premium shares compared: {parity or 'own spreads'}, {joint['horizon'].iloc[0]}",
        head=("difference", "interval", "p"),
        lines=tuple(lines),
        notes=(
            "Equal shares across markets are implied by no theory: the comparison is descriptive.",
            f"{methods[:1].upper()}{methods[1:]}.",
        ),
    )


def _notes(columns: list[Column]) -> tuple[str, ...]:
    said: dict[str, list[str]] = {}
    for column in columns:
        said.setdefault(_method(column), []).append(column.market)
    methods = [f"{', '.join(markets)}: {method}." for method, markets in said.items()]
    for what, words_of in (("Second opinion", _second_words), ("By draws", _beside_words)):
        others: dict[str, list[str]] = {}
        for column in columns:
            others.setdefault(words_of(column), []).append(column.market)
        methods += [f"{what}, {', '.join(markets)}: {words}." for words, markets in others.items() if words]
    warnings = [
        f"{column.market}: {text}."
        for column in columns
        for text in column.rows.loc[column.rows["section"] == "warning", "note"]
    ]
    return (
        "A share is weight times slope of a leg on the signal, all legs on one shared sample; standard errors in "
        "parentheses, intervals in brackets. The shares add up to one by an accounting identity. The resolved premium "
        "share is the premium share over all that is not carried over.",
        *([STANDING] if any(_method(column).startswith("entity") for column in columns) else []),
        "R2 is within the effects, or centred where there are none. Levels are in percent, a log ratio and columns of "
        "your own as they are.",
        *methods,
        *_doubts(columns),
        *warnings,
    )


def _doubts(columns: list[Column]) -> list[str]:
    """What the question marks of the p-values mean, once for each reason."""
    tests = [
        text
        for column in columns
        for term, rank in (("nothing paid", "headline"), ("nothing paid", "second opinion"), ("all paid", "headline"))
        for text in column.find(term, rank=rank)["note"]
    ]
    return doubts(tests)


def _second_words(column: Column) -> str:
    """Method of the second opinion without the effects, where it is not the one of the other rows."""
    found = column.find("nothing paid", rank="second opinion")
    words = str(found["method"].iloc[0]) if len(found) else ""
    return "" if words == column.text("all paid", "method") else words.partition("; ")[2]


def _beside_words(column: Column) -> str:
    """Method of the draws where they stand beside headline and second opinion."""
    return column.text("nothing paid", "method", section="draws") if _beside(column).text else ""


def _method(column: Column) -> str:
    premium = column.text("nothing paid", "method")
    away = column.text("all paid", "method")
    if not premium:
        rows = column.find("signal")
        return str(rows["method"].iloc[0]) if len(rows) else ""
    same = premium.partition(CHOSEN)[0] == away
    return premium if same or not away else f"{premium}; other rows: {away}"
