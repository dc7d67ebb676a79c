"""A first study from the heads of data files: what they give away is filled in, the rest is a question.

A line `# key = ...   # question: ...` waits for an answer: take away the leading `# ` and put in the right word. An
unanswered key is a comment, so `read_study` names it as missing; no unit and no direction is ever guessed.
"""

from __future__ import annotations

import json
import os
import re
from collections.abc import Iterator, Mapping, Sequence
from pathlib import Path
from typing import get_args

from carrylab import options
from carrylab.data.calendar import INTERVALS, Interval, parse_tenor
from carrylab.sources import KIND_ROLES
from carrylab.start_guess import LENGTHS, VALUES, Head, read_head

Lines = Iterator[str]
# An equity market takes exchange rates only when its returns are wanted in the home currency.
ROLES = {**KIND_ROLES, "equities": ("prices", "dividends", "total_return", "deposits")}
NAMES = {"bonds": "Bonds", "currencies": "Currencies", "equities": "Equity indices"}
# The roles that make a market: deposits alone make none.
MAKES = {"bonds": ("zero_yields",), "currencies": ("spot", "forwards"), "equities": ("prices", "total_return")}
CODE_KEYS = {"zero_yields": "economy", "deposits": "currency", "spot": "currency", "forwards": "currency"}
USUAL = ("24m", "36m", "60m", "120m")
RATES, PRICES = ("zero_yields", "deposits"), ("spot", "forwards")
BEFORE = 58


def start(files: Sequence[Path], study: Path) -> str:
    """The text of a commented study for these files, with paths relative to `study`.

    Raises DataError, one line, for a file that cannot be read or holds no dates or no numbers.
    """
    heads = [read_head(path) for path in files]
    return "\n".join(_study(heads, study)) + "\n"


def _study(heads: Sequence[Head], study: Path) -> Lines:
    yield "# Begun by `carrylab start`. A line that carries the word question waits for you: take away the leading"
    yield f"# hash, put in the right word, and then run: carrylab check {study.name}"
    yield f"title = {_text('Is the spread paid or passed on?')}"
    if any(role in head.roles for head in heads for role in PRICES):
        home = _home(heads)
        yield _asked(
            "home", _text(home or "USD"), f"the home currency{f'; {home} stands in every pair' if home else ''}"
        )
    yield from _economies(heads)
    for kind, makers in MAKES.items():
        if any(role in head.roles for head in heads for role in makers):
            yield from _market(kind, _heads_of(kind, heads), study)
    for head in heads:
        if "panel" in head.roles:
            yield from _columns_market(head, study)
        elif not head.roles:
            yield from _unplaced(head, study)


def _heads_of(kind: str, heads: Sequence[Head]) -> list[Head]:
    """The files of one market; a bill rate that stands beside share prices belongs to them alone."""
    beside = [head for head in heads if "deposits" in head.roles and set(head.roles) & set(MAKES["equities"])]
    mine = [head for head in heads if set(ROLES[kind]) & set(head.roles)]
    if kind == "currencies":
        return [head for head in mine if head not in beside]
    return [head for head in mine if not beside or set(head.roles) != {"deposits"}]


def _text(value: str) -> str:
    return json.dumps(value, ensure_ascii=False)


def _listed(values: Sequence[str]) -> str:
    return f"[{', '.join(map(_text, values))}]"


def _table(mapping: Mapping[str, str]) -> str:
    return "{ " + ", ".join(f"{_key(key)} = {_text(value)}" for key, value in mapping.items()) + " }"


def _key(name: str) -> str:
    return name if re.fullmatch(r"[A-Za-z0-9_-]+", name) else _text(name)


def _asked(key: str, suggestion: str, question: str) -> str:
    return f"{f'# {key} = {suggestion}':<{BEFORE}} # question: {question}"


def _allowed(words: object) -> str:
    return f"allowed: {', '.join(map(_text, get_args(words)))}"


def _few(names: Sequence[str]) -> str:
    return ", ".join(names) if len(names) <= 12 else f"{', '.join(names[:6])} ... {', '.join(names[-2:])}"


def _home(heads: Sequence[Head]) -> str:
    """The currency that stands in every pair of the first file of pairs, where there is one."""
    for head in heads:
        pairs: list[set[str]] = [set(re.findall("[A-Z]{3}", code)) for code in head.codes.get("pair", ())]
        common: set[str] = set.intersection(*pairs) if pairs else set()
        if len(common) == 1:
            return common.pop()
    return ""


def _economies(heads: Sequence[Head]) -> Lines:
    """One question an economy; a currency whose code begins with the economy's is put in front of it."""
    found = sorted({code for head in heads for code in head.codes.get("economy", ()) if len(code) == 2})
    texts = [code for head in heads for key in ("currency", "pair") for code in head.codes.get(key, ())]
    currencies = sorted({part for text in texts for part in re.findall("[A-Z]{3}", text)})
    if not found and any("prices" in head.roles for head in heads):
        # Share prices without codes: their market still looks up the bill rate by the economy's currency.
        found, currencies = ["US"], ["USD"]
    if not found:
        return
    yield f"\n{'# [economies]':<{BEFORE}} # question: which currency are an economy's rates and prices in?"
    for economy in found:
        like = [currency for currency in currencies if currency.startswith(economy)] or [f"{economy}?"]
        yield _asked(economy, _text(like[0]), f"the currency of {economy}, an ISO 4217 code")


def _market(kind: str, heads: Sequence[Head], study: Path) -> Lines:
    roles = {role for head in heads for role in head.roles}
    yield f"\n[[market]]\nname = {_text(NAMES[kind])}\nkind = {_text(kind)}"
    yield _interval([head for head in heads if set(head.roles) - {"deposits"}])
    yield f"parities = {_listed(_parities(kind, roles))}"
    yield _asked("horizons", '["12m"]', 'how far ahead, in whole intervals, such as ["1m", "12m"]')
    if kind == "bonds":
        yield from _maturities(heads)
    if kind == "equities" and roles.isdisjoint({"dividends", "total_return"}):
        yield "# No dividends and no total return index among the files: one of them is needed."
    for role in ROLES[kind]:
        for head in heads:
            if role in head.roles:
                yield from _source(role, head, study)


def _interval(heads: Sequence[Head]) -> str:
    """The coarsest interval among the files, as finer ones are sampled at its end."""
    known = [head.dates.interval for head in heads if head.dates.interval]
    if not known:
        return _asked("interval", '"month"', _allowed(Interval))
    return f"interval = {_text(max(known, key=INTERVALS.index))}"


def _parities(kind: str, roles: set[str]) -> tuple[str, ...]:
    if kind == "bonds":
        return ("forward-spot", "yield-spread")
    if kind == "equities":
        return ("dividend-price", "carry")
    by_rates = ("uncovered-interest",) if "deposits" in roles else ()
    return (*by_rates, *(("forward-discount",) if "forwards" in roles else ())) or ("uncovered-interest",)


def _maturities(heads: Sequence[Head]) -> Lines:
    lengths = sorted({parse_tenor(text) for head in heads for text in head.lengths.values() if text})
    quoted = [length.canonical for length in lengths]
    chosen = [length for length in USUAL if length in quoted] or quoted or ["24m", "60m"]
    yield _asked("maturities", _listed(chosen), f"which bonds? quoted: {_few(quoted) or 'not told by the file'}")
    yield _asked("missing_maturity", '"exact"', f"maturity less horizon, unquoted; {_allowed(options.MissingMaturity)}")


def _source(role: str, head: Head, study: Path) -> Lines:
    """One [[market.data.ROLE]] table."""
    yield f"[[market.data.{role}]]"
    yield from _file(head, study)
    yield from _shape(role, head)
    yield from _constants(role, head)
    if role in RATES:
        yield from _rate(head, head.roles[role])
    if role in PRICES:
        yield from _price(role, head)
    if role == "dividends":
        yield _asked("basis", '"trailing 12 months"', _allowed(options.Basis))
    yield _asked("timing", '"end"', f"end of the period or average over it; {_allowed(options.Timing)}")


def _file(head: Head, study: Path) -> Lines:
    dates = head.dates
    yield f"# {dates.interval or 'date'}s from {dates.first} to {dates.last}"
    yield f"file = {_text(_relative(head.path, study))}"
    if dates.order == "?":
        yield _asked("date_order", '"dmy"', 'day or month first? every cell can be both; allowed: "dmy", "mdy"')
    elif dates.order:
        yield f"date_order = {_text(dates.order)}"
    if head.decimal == ",":
        yield 'decimal = ","'
    if head.missing:
        yield f"missing = {_listed(head.missing)}"


def _relative(path: Path, study: Path) -> str:
    try:
        return Path(os.path.relpath(path, study.parent)).as_posix()
    except ValueError:  # another drive
        return path.resolve().as_posix()


def _shape(role: str, head: Head) -> Lines:
    """Which column is what, the key along the columns, and a key that stands nowhere in the file."""
    length = _length_key(role)
    mapping = {column: word for word, column in _words(head, length).items() if column != word}
    if head.spread:
        yield f"spread = {_text(length if head.spread in LENGTHS else head.spread)}"
    elif head.roles[role] not in ("", "value") and len(head.values) > 1:
        mapping[head.roles[role]] = "value"
    unclear = [name for name, text in head.lengths.items() if not text]
    if unclear:
        guess = mapping | {name: f"{re.sub('[^0-9]', '', name)}m" for name in unclear}
        yield _asked("columns", _table(guess), "are the numbers in the columns' names months? write years as 3y")
        return
    if head.spread:
        mapping |= {name: text for name, text in head.lengths.items() if name != text}
    if mapping:
        yield f"columns = {_table(mapping)}"


def _length_key(role: str) -> str:
    return "maturity" if role == "zero_yields" else "tenor"


def _words(head: Head, length: str) -> dict[str, str]:
    """Word of the study -> column of the file."""
    keys = {length if key in LENGTHS else key: name for key, name in head.keys.items()}
    quotes = {name.lower(): name for name in head.values if name.lower() in VALUES}
    return {"date": head.dates.column} | keys | quotes


def _constants(role: str, head: Head) -> Lines:
    """Keys that stand nowhere in the file and so hold for all of it."""
    length = _length_key(role)
    if not any(key not in LENGTHS for key in head.codes):
        key = CODE_KEYS.get(role, "economy")
        known = '"US"' if key == "economy" else '"USD"'
        yield _asked(key, known, f"whose numbers are they? no column says; one {key} code")
    if role in (*RATES, "forwards") and not head.lengths:
        yield _asked(length, '"3m"', f"of which {length}? no column says; a length such as 3m")


def _rate(head: Head, column: str) -> Lines:
    low, high = head.span(column)
    yield _asked("unit", '"percent"', f"numbers run from {low:g} to {high:g}; {_allowed(options.Unit)}")
    yield _asked("compounding", '"annual"', _allowed(options.Compounding))
    yield _asked("day_count", '"act/360"', f"for simple and discount rates only; {_allowed(options.DayCount)}")


def _price(role: str, head: Head) -> Lines:
    """The direction of quotes: asked even for pairs, as points and outright prices look alike to a file."""
    allowed = [word for word in get_args(options.Quote) if role == "forwards" or word != "points"]
    if "pair" in head.codes:
        asked = "units of the second currency for one of the first?" + (" or points?" if role == "forwards" else "")
        yield _asked("quote", '"pair"', f"{asked} allowed: {', '.join(map(_text, allowed[2:]))}")
    else:
        ways = [word for word in allowed if word != "pair"]
        yield _asked("quote", '"home per foreign"', f"which way? allowed: {', '.join(map(_text, ways))}")
    if role == "forwards":
        yield _asked("scale", "10000", 'for quote = "points" only: points in one unit of the price, or a table by code')


def _columns_market(head: Head, study: Path) -> Lines:
    """A market of the user's own signal and legs."""
    yield f'\n[[market]]\nname = {_text(head.path.stem)}\nkind = "columns"'
    yield _interval([head])
    yield _asked("horizons", '["12m"]', "how far do the legs reach from the date of their row?")
    yield "[market.data.panel]"
    yield from _file(head, study)
    if head.dates.column != "date":
        yield f"columns = {_table({head.dates.column: 'date'})}"
    entity = next((column for key, column in head.keys.items() if key not in LENGTHS), "")
    if entity:
        yield f"entity = {_text(entity)}"
    signal, *others = head.values
    yield _asked("signal", _text(signal), f"which column is known at the date? found: {_few(head.values)}")
    legs = (f'{{ name = {_text(name)}, column = {_text(name)}, weight = 1, role = "other" }}' for name in others)
    roles = _allowed(options.Role)
    yield _asked("legs", f"[ {', '.join(legs)} ]", f"which are outcomes, with which weight, null and role? {roles}")


def _unplaced(head: Head, study: Path) -> Lines:
    """A file whose role cannot be told."""
    file = _relative(head.path, study)
    key = f", spread = {_text(head.spread)}" if head.spread else ""
    roles = ", ".join(dict.fromkeys(role for roles in KIND_ROLES.values() for role in roles))
    yield f"\n# {file}: its name and its columns ({_few(head.values)}) do not tell what it holds."
    yield f"# It may be one of a market's data: {roles};"
    yield "# or a further predictor, which stands in a market as:"
    yield f'# controls = [ {{ name = {_text(head.path.stem)}, file = {_text(file)}{key}, known_after = "0d" }} ]'
