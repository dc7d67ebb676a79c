"""One table as a self-contained piece of HTML, for notebooks."""

from __future__ import annotations

from html import escape

from carrylab.report.table import Line, Table

STYLE = "border-collapse:collapse;font-variant-numeric:tabular-nums"
RULE = "border-top:1px solid;border-bottom:1px solid"


def html_table(table: Table) -> str:
    """The table with its notes; every text is escaped."""
    head = "".join(f'<th scope="col" style="text-align:right;{RULE}">{escape(name)}</th>' for name in table.head)
    body = "".join(_row(line, len(table.head)) for line in table.lines)
    notes = "".join(f"<p><small>{escape(note)}</small></p>" for note in table.notes)
    caption = f"<caption>{escape(table.title)}</caption>" if table.title else ""
    top = f'<thead><tr><th style="{RULE}">{escape(table.corner)}</th>{head}</tr></thead>'
    return f'<table style="{STYLE}">{caption}{top}<tbody>{body}</tbody></table>{notes}'


def _row(line: Line, width: int) -> str:
    if line.heading:
        return f'<tr><th scope="rowgroup" colspan="{width + 1}" style="text-align:left">{escape(line.label)}</th></tr>'
    cells = "".join(f'<td style="text-align:right">{escape(cell.text.strip())}</td>' for cell in line.cells)
    return f'<tr><th scope="row" style="text-align:left;font-weight:normal">{escape(line.label)}</th>{cells}</tr>'
