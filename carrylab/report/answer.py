"""The answer in three sentences: which market pays its spread out, which lets it come true, and how sure that is."""

from __future__ import annotations

import math
import re
from collections.abc import Callable, Iterable, Iterator, Sequence
from dataclasses import dataclass

import pandas as pd

from carrylab.report.numbers import digits_of
from carrylab.report.side_by_side import Column, columns_of, p_of, share_of, verdict_of
from carrylab.report.table import Cell, doubts, number_cell

# Words and numbers in the order they are read.
Sentence = tuple[str | Cell, ...]
LEVEL = 0.05
UNITS = {"d": "day", "w": "week", "m": "month", "q": "quarter", "y": "year"}


@dataclass(frozen=True, eq=False, slots=True)
class Standing:
    """One market's shares as (share, error), NaN where it has none, and what its tests say of them."""

    column: Column
    paid: tuple[float, float]
    true: tuple[float, float]
    carried: tuple[float, float]
    premium: str
    fundamental: str

    @property
    def has_shares(self) -> bool:
        """Whether an identity gives this market shares."""
        return not math.isnan(self.paid[0])


def answer(findings: pd.DataFrame) -> tuple[Sentence, ...]:
    """Three sentences on every market's own spread; none where no market has a slope."""
    standing = [_standing(column) for column in columns_of(findings)]
    if not standing:
        return ()
    shared = [one for one in standing if one.has_shares]
    return tuple(sentence for sentence in (_paid(standing, shared), _true(shared), _sure(shared, findings)) if sentence)


def answer_lines(findings: pd.DataFrame) -> list[str]:
    """The same sentences as plain text."""
    return ["".join(part if isinstance(part, str) else part.text for part in found) for found in answer(findings)]


def _standing(column: Column) -> Standing:
    paid, true, carried = (share_of(column, role) for role in ("return", "fundamental", "carried over"))
    return Standing(column, paid, true, carried, _premium(column, paid[0]), _fundamental(column, true[0]))


def _premium(column: Column, share: float) -> str:
    """The table's verdict on the premium; one test alone where there is no second opinion."""
    words = verdict_of(column).text
    if not words:
        words = "one test" if column.number("nothing paid", "p_value") < LEVEL else "not seen"
    return "against" if words in ("firm", "one test") and share < 0 else words


def _fundamental(column: Column, share: float) -> str:
    if not column.number("all paid", "p_value") < LEVEL:
        return "not seen"
    return "true" if share > 0 else "against"


def _paid(standing: Sequence[Standing], shared: Sequence[Standing]) -> Sentence:
    """Which market pays its spread out."""
    by = _grouped(shared, lambda one: one.premium)
    over, paying = _over(standing), [*by.get("firm", []), *by.get("one test", [])]
    said: list[Sentence] = []
    if paying:
        shares = _listed([_share(one.paid, word=at == 0) for at, one in enumerate(paying)])
        places = f"{over}the spread is paid out in {_names(paying)}, where each point of it was followed by "
        said.append((places, *shares, " points of excess return"))
    elif shared:
        said.append((f"{over}no market is seen to pay its spread out",))
    words = {
        "against": "what followed a wide spread was a loss: ",
        "in doubt": "whether it is paid is in doubt: ",
        "not seen": "no premium is seen: ",
    }
    said += [(start, *_shares(by[verdict], "paid")) for verdict, start in words.items() if verdict in by]
    without = [one for one in standing if not one.has_shares]
    if without:
        said.append((f"in {_names(without)} no identity ties spread and outcomes together, so there are no shares",))
    return _sentence(said)


def _true(shared: Sequence[Standing]) -> Sentence:
    """Which market lets it come true."""
    by = _grouped(shared, lambda one: one.fundamental)
    words = {
        "true": "the spread comes true in the fundamental: ",
        "against": "the fundamental moved the other way: ",
        "not seen": "what came true is no more than chance: ",
    }
    said = [(start, *_shares(by[verdict], "true")) for verdict, start in words.items() if verdict in by]
    if shared and "true" not in by:
        said.insert(0, ("in no market is the spread seen to come true in the fundamental",))
    carried = [one for one in shared if not math.isnan(one.carried[0])]
    if carried:
        said.append(("still in the price: ", *_shares(carried, "carried")))
    return _sentence(said)


def _sure(shared: Sequence[Standing], findings: pd.DataFrame) -> Sentence:
    """How sure: both tests of each market, whether the markets differ, and how much independent evidence there is."""
    words = {
        "firm": "a premium is firm, both its tests below 5%, in ",
        "one test": "the one test of the premium is below 5% in ",
        "against": "the loss is below 5% in ",
        "in doubt": "the two tests leave it in doubt in ",
        "not seen": "no test is below 5% in ",
    }
    by = _grouped(shared, lambda one: one.premium)
    said = [(start, *_listed([_tests(one) for one in by[kind]])) for kind, start in words.items() if kind in by]
    windows = [one.column.number("independent windows", section="summary") for one in shared]
    fewest = min((count for count in windows if not math.isnan(count)), default=math.nan)
    said += _equal(findings, shared)
    said += [(words.removesuffix("."),) for words in _marks(shared)]
    if not math.isnan(fewest):
        more = "" if len({round(count) for count in windows}) == 1 else " or more"
        said.append(("all of it is in sample, on ", number_cell(fewest, 0), f"{more} windows that do not overlap"))
    return _sentence([("how sure: ", *said[0]), *said[1:]]) if said else ()


def _equal(findings: pd.DataFrame, shared: Sequence[Standing]) -> list[Sentence]:
    """Whether the resolved shares differ across markets, where that was tested."""
    joint = findings[(findings["section"] == "joint") & (findings["term"] == "all resolved premium shares equal")]
    joint = joint[(joint["parity"] == "each market's own spread") & joint["p_value"].notna()]
    joint = joint[joint["horizon"].isin({one.column.horizon for one in shared})]
    if joint.empty:
        return []
    differ = "differ" if joint["p_value"].iloc[0] < LEVEL else "differ by no more than chance"
    return [(f"the markets' resolved premium shares {differ} (p ", p_of(joint), ")")]


def _marks(shared: Sequence[Standing]) -> list[str]:
    """What the question marks beside p-values mean, where there are any."""
    found = [
        one.column.find("nothing paid", rank=rank)["note"] for one in shared for rank in ("headline", "second opinion")
    ]
    return doubts(note for notes in found for note in notes)


def _tests(one: Standing) -> Sentence:
    second = p_of(one.column.find("nothing paid", rank="second opinion"))
    more: Sentence = () if math.isnan(second.value) else (" and ", second)
    return (f"{one.column.market} (p ", p_of(one.column.find("nothing paid")), *more, ")")


def _shares(some: Iterable[Standing], field: str) -> Sentence:
    """Each market's share with its error: 0.29 (0.08) in Equities."""
    return _listed([(*_share(getattr(one, field)), f" in {one.column.market}") for one in some])


def _share(share: tuple[float, float], *, word: bool = False) -> Sentence:
    """A share with its error in parentheses; `word` says once what that is."""
    value, error = share
    digits = min(digits_of(error), 3)
    return (number_cell(value, digits), " (standard error " if word else " (", number_cell(error, digits), ")")


def _grouped(some: Iterable[Standing], key: Callable[[Standing], str]) -> dict[str, list[Standing]]:
    found: dict[str, list[Standing]] = {}
    for one in some:
        found.setdefault(key(one), []).append(one)
    return found


def _names(some: Iterable[Standing]) -> str:
    return "".join(str(part) for part in _listed([(one.column.market,) for one in some]))


def _listed(parts: Sequence[Sentence]) -> Sentence:
    """a, b and c."""
    return tuple(_joined(parts, ", ", " and "))


def _joined(parts: Sequence[Sentence], between: str, last: str) -> Iterator[str | Cell]:
    for at, part in enumerate(parts):
        if at:
            yield last if at == len(parts) - 1 else between
        yield from part


def _sentence(clauses: Sequence[Sentence]) -> Sentence:
    """Clauses with semicolons between them, a capital first and a stop at the end."""
    if not clauses:
        return ()
    first, *rest = _joined(clauses, "; ", "; ")
    return (str(first)[:1].upper() + str(first)[1:], *rest, ".")


def _over(standing: Sequence[Standing]) -> str:
    """The horizon in words where all markets share it."""
    found = {one.column.horizon for one in standing}
    parts = re.fullmatch(r"(\d+)([dwmqy])", next(iter(found))) if len(found) == 1 else None
    if not parts:
        return ""
    count = int(parts[1])
    return f"over {count} {UNITS[parts[2]]}{'' if count == 1 else 's'} "
