"""Typed readers for the keys of a study file: a raw TOML value in, the checked value out, or what is allowed."""

from __future__ import annotations

import datetime
import difflib
import re
from collections.abc import Callable, Iterable, Mapping
from dataclasses import dataclass, field
from typing import Any

from carrylab.data.calendar import Tenor, parse_tenor

Reader = Callable[[Any], Any]
_PERIOD = re.compile(r"\d{4}(-(0[1-9]|1[0-2])(-(0[1-9]|[12]\d|3[01]))?|-Q[1-4]|-W(0[1-9]|[1-4]\d|5[0-3]))?")


class NotAllowedError(Exception):
    """A value a reader refuses; the text says what is allowed."""


@dataclass(slots=True)
class Problems:
    """The error lines of one study file, collected so that a user sees them all at once."""

    file: str
    lines: list[str] = field(default_factory=list)

    def add(self, place: str, text: str) -> None:
        """Note one problem at one place of the file."""
        self.lines.append(f"{self.file}: {place}: {text}")


def nearest(word: str, words: Iterable[str]) -> str:
    """`, did you mean ...?` where a known word is close, else nothing."""
    close = difflib.get_close_matches(str(word), list(words), n=1, cutoff=0.6)
    return f"; did you mean {close[0]!r}?" if close else ""


def read_table(raw: Any, readers: Mapping[str, Reader], place: str, problems: Problems) -> dict[str, Any]:
    """Read every key of one TOML table; unknown keys and refused values become problems."""
    if not isinstance(raw, dict):
        problems.add(place, f"{raw!r} is not allowed; allowed is a table of keys")
        return {}
    values = {}
    for key, value in raw.items():
        if key not in readers:
            known = ", ".join(sorted(readers))
            problems.add(f"{place}, key {key}", f"unknown key{nearest(key, readers)} Known here: {known}")
            continue
        try:
            values[key] = readers[key](value)
        except NotAllowedError as refused:
            problems.add(f"{place}, key {key}", f"{shown(value)} is not allowed; {refused}")
    return values


def shown(value: Any) -> str:
    """A raw value as it goes into a message, cut to a readable length."""
    text = repr(value) if not isinstance(value, bool) else str(value).lower()
    return text if len(text) <= 80 else text[:77] + "..."


def text(value: Any) -> str:
    """Any text that is not empty."""
    if not isinstance(value, str) or not value.strip():
        raise NotAllowedError("allowed is a text in quotes, not empty")
    return value


def pattern(value: Any) -> str:
    """A regular expression with named groups."""
    try:
        compiled = re.compile(text(value))
    except re.error as wrong:
        raise NotAllowedError(f"allowed is a regular expression ({wrong})") from None
    if not compiled.groupindex:
        raise NotAllowedError("the pattern needs named groups such as (?P<currency>...)")
    return compiled.pattern


def choice(allowed: Iterable[str]) -> Reader:
    """One of the given words."""
    words = tuple(allowed)

    def read(value: Any) -> str:
        if value not in words:
            hint = nearest(value, words) if isinstance(value, str) else ""
            raise NotAllowedError(f"allowed: {', '.join(map(repr, words))}{hint}")
        return str(value)

    return read


def number(low: float, high: float) -> Reader:
    """A number strictly between two bounds."""

    def read(value: Any) -> float:
        if isinstance(value, bool) or not isinstance(value, (int, float)) or not low < value < high:
            raise NotAllowedError(f"allowed is a number above {low:g} and below {high:g}")
        return float(value)

    return read


def switch(value: Any) -> bool:
    """True or false."""
    if not isinstance(value, bool):
        raise NotAllowedError("allowed: true, false")
    return value


def whole(low: int, high: int = 10**9) -> Reader:
    """A whole number from `low` to `high`."""

    def read(value: Any) -> int:
        if isinstance(value, bool) or not isinstance(value, int) or not low <= value <= high:
            raise NotAllowedError(f"allowed is a whole number from {low} to {high}")
        return value

    return read


def draws(value: Any) -> int:
    """A number of draws: none, or enough for a p-value of .02."""
    if value != 0 or isinstance(value, bool):
        try:
            return int(whole(99)(value))
        except NotAllowedError:
            raise NotAllowedError("allowed is 0 for none, or a whole number from 99") from None
    return 0


def tenor(value: Any) -> Tenor:
    """A length of time above zero, such as 12m."""
    try:
        length = parse_tenor(text(value))
    except ValueError:
        raise NotAllowedError('allowed is a length of time such as "30d", "2w", "12m", "4q" or "5y"') from None
    if not length.months and not length.days:
        raise NotAllowedError("allowed is a length of time above zero")
    return length


def delay(value: Any) -> Tenor:
    """A publication lag: a length of time, zero included."""
    try:
        return parse_tenor(text(value))
    except ValueError:
        raise NotAllowedError('allowed is a length of time such as "0d", "6w" or "2m"') from None


def period(value: Any) -> str:
    """A date or period in ISO 8601 form."""
    if isinstance(value, datetime.date):
        return value.isoformat()[:10]
    if isinstance(value, int) and not isinstance(value, bool) and 1000 <= value <= 9999:
        return str(value)
    if isinstance(value, str) and _PERIOD.fullmatch(value) and _exists(value):
        return value
    raise NotAllowedError('allowed is a date or period such as "1996", "1996-01", "1996-Q1" or "1996-01-31"')


def _exists(value: str) -> bool:
    if len(value) != len("2024-01-31") or "Q" in value or "W" in value:
        return True
    try:
        datetime.date.fromisoformat(value)
    except ValueError:
        return False
    return True


def several(reader: Reader) -> Reader:
    """A list of at least one value, without repetitions."""

    def read(value: Any) -> tuple[Any, ...]:
        if not isinstance(value, list) or not value:
            raise NotAllowedError("allowed is a list in square brackets with at least one value")
        values = tuple(reader(item) for item in value)
        if any(item in values[:at] for at, item in enumerate(values)):
            raise NotAllowedError("a value stands twice in this list")
        return values

    return read


def texts(value: Any) -> tuple[str, ...]:
    """A list of texts; the empty text is allowed."""
    if not isinstance(value, list) or not all(isinstance(item, str) for item in value):
        raise NotAllowedError("allowed is a list of texts in quotes")
    return tuple(value)


def mapping(reader: Reader) -> Reader:
    """A table from codes to values."""

    def read(value: Any) -> dict[str, Any]:
        if not isinstance(value, dict) or not value:
            raise NotAllowedError("allowed is a table such as { QNK = ..., others = ... }")
        return {str(key): reader(item) for key, item in value.items()}

    return read


def by_code(reader: Reader) -> Reader:
    """One value for every code, or a table from codes to values."""
    table = mapping(reader)

    def read(value: Any) -> dict[str, Any]:
        return table(value) if isinstance(value, dict) else {"others": reader(value)}

    return read


def one_character(value: Any) -> str:
    """A single character, as a separator is."""
    if not isinstance(value, str) or len(value) != 1:
        raise NotAllowedError('allowed is one character, such as ";" or "\\t"')
    return value


def codec(value: Any) -> str:
    """The name of a text encoding this Python knows."""
    try:
        "".encode(text(value))
    except LookupError:
        raise NotAllowedError('allowed is the name of a text encoding, such as "utf-8" or "latin-1"') from None
    return str(value)


def rho(value: Any) -> float | None:
    """The discount coefficient of the log-linear return: "sample" (None) or a number between 0 and 1."""
    if value == "sample":
        return None
    try:
        return float(number(0, 1)(value))
    except NotAllowedError:
        raise NotAllowedError('allowed: "sample", or a number above 0 and below 1') from None
