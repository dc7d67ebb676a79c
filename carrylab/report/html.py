"""One table as a self-contained piece of HTML, for notebooks."""

from __future__ import annotations

from html import escape

from carrylab.report.table import Line, Table

STYLE = "border-collapse:collapse;font-variant-numeric:tabular-nums"
RULE = "border-top:1px solid;border-bottom:1px solid;padding:.2em .75em"
FOOT = "border-bottom:1px solid"
CELL = "text-align:right;padding:0 .75em"


def html_table(table: Table) -> str:
    """The table with its notes; every text is escaped."""
    head = "".join(f'<th scope="col" style="text-align:right;{RULE}">{escape(name)}</th>' for name in table.head)
    body = "".join(_row(line, len(table.head)) for line in table.filled())
    notes = "".join(f"<p><small>{escape(note)}</small></p>" for note in table.notes)
    caption = f"<caption>{escape(table.title)}</caption>" if table.title else ""
    top = f'<thead><tr><th style="{RULE}">{escape(table.corner)}</th>{head}</tr></thead>'
    return f'<table style="{STYLE}">{caption}{top}<tbody style="{FOOT}">{body}</tbody></table>{notes}'


def _label_style(line: Line) -> str:
    """Labels that begin with spaces stand further in."""
    indent = 0.75 + 0.5 * (len(line.label) - len(line.label.lstrip()))
    return f"text-align:left;font-weight:normal;padding-left:{indent:g}em"


def _row(line: Line, width: int) -> str:
    if line.heading:
        return f'<tr><th scope="rowgroup" colspan="{width + 1}" style="text-align:left">{escape(line.label)}</th></tr>'
    cells = "".join(f'<td style="{CELL}">{escape(cell.text.strip())}</td>' for cell in line.cells)
    return f'<tr><th scope="row" style="{_label_style(line)}">{escape(line.label.strip())}</th>{cells}</tr>'
