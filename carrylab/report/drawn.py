"""What draws under the null say of a pooled slope, in one note beneath its table."""

from __future__ import annotations

from collections.abc import Hashable
from typing import Any

import pandas as pd

from carrylab.report.numbers import digits_of, fixed, in_brackets, p_value

Record = dict[Hashable, Any]


def draw_notes(rows: pd.DataFrame) -> list[str]:
    """One note from the pooled rows of section `draws` of one table; none where there were no draws."""
    terms: dict[str, Record] = {str(row["term"]): row for row in rows.to_dict("records")}
    if "slope by chance" not in terms:
        return []
    chance, inverted = terms["slope by chance"], terms["slope by inversion"]
    digits = min(digits_of((chance["upper"] - chance["lower"]) / 4), 4)
    said = [
        f"by chance alone the slope of the return leg lies within "
        f"{in_brackets(chance['lower'], chance['upper'], digits)} and R2 below "
        f"{fixed(terms['R2 by chance']['estimate'], 3)}",
        f"slopes that the cosine t would not reject {in_brackets(inverted['lower'], inverted['upper'], digits)}",
        f"slope with its bias out {fixed(terms['bias-corrected slope']['estimate'], digits)}",
        f"p, nothing paid {p_value(terms['nothing paid']['p_value'])}",
    ]
    if "all paid" in terms:
        said.append(f"p, all paid {p_value(terms['all paid']['p_value'])}")
    without = str(terms["nothing paid"]["note"])
    return [f"Draws under the null, pooled{f', {without}' if without else ''}: {'; '.join(said)}."]
