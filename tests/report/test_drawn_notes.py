"""The note that draws put beneath a market's table, and the line of their second null."""

from __future__ import annotations

import pandas as pd

from carrylab.findings import to_frame
from carrylab.report.drawn import draw_notes

PLACE = {"section": "draws", "market": "FX", "parity": "carry", "horizon": "12m", "group": "pooled", "sample": "all"}
ROWS = [
    PLACE | {"term": "nothing paid", "estimate": 1.62, "p_value": 0.009, "note": "without CCC"},
    PLACE | {"term": "bias-corrected slope", "estimate": 1.5},
    PLACE | {"term": "slope by chance", "lower": -0.891, "upper": 0.954},
    PLACE | {"term": "slope by inversion", "estimate": 1.62, "lower": 0.41, "upper": 2.63},
    PLACE | {"term": "R2 by chance", "estimate": 0.0221},
    PLACE | {"term": "all paid", "estimate": -0.62, "p_value": 0.31},
]


def test_one_note_says_all_that_draws_say() -> None:
    assert draw_notes(to_frame(ROWS)) == [
        "Draws under the null, pooled, without CCC: by chance alone the slope of the return leg lies within [-0.89, "
        "0.95] and R2 below 0.022; slopes that the cosine t would not reject [0.41, 2.63]; slope with its bias out "
        "1.50; p, nothing paid 0.009; p, all paid 0.310."
    ]


def test_without_the_second_null_its_p_is_left_out() -> None:
    assert draw_notes(to_frame(ROWS[:-1]))[0].endswith("p, nothing paid 0.009.")


def test_without_draws_there_is_no_note() -> None:
    assert draw_notes(pd.DataFrame(columns=to_frame(ROWS).columns)) == []


def test_small_slopes_keep_two_figures_of_their_spread() -> None:
    rows = [row | ({"lower": -0.0002, "upper": 0.0002} if "chance" in str(row["term"]) else {}) for row in ROWS]
    assert "[-0.0002, 0.0002]" in draw_notes(to_frame(rows))[0]
