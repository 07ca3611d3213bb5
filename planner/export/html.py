"""Pages for a browser, self-contained, printed on A4. Every text is escaped where it enters a page."""

from html import escape
from string import Template

from planner.export.commands import named_in, radio_and_commands

MOMENT = ("moment", "time", "azimuth", "elevation")
CARD_ROOM = (35, 94, 80)  # of a printed card: lines under the times, letters across and beside a label
HELD_LETTERS = 20  # shorter texts of a table stay on one line
PAGE = Template("""<!DOCTYPE html>
<html lang="en">
<head>
<meta charset="utf-8">
<title>$title</title>
<style>
@page { size: $size; margin: 12mm; }
body { font: 10pt/1.4 "DejaVu Sans", Verdana, sans-serif; color: #222;
  max-width: $width; margin: 1em auto; padding: 0 1em; }
h1 { font-size: 17pt; margin: 0; } h2 { font-size: 11.5pt; margin: 1.1em 0 .3em; }
p.under { margin: .2em 0 1em; }
.side { display: flex; gap: 1em; align-items: flex-start; justify-content: space-between; }
.side img { flex: 0 1 330px; min-width: 200px; } @media screen and (max-width: 600px) { .side { flex-wrap: wrap; } }
table { border-collapse: collapse; }
th { text-align: left; vertical-align: top; white-space: nowrap; font-weight: normal; color: #444;
  padding: .15em 1em .15em 0; }
td { vertical-align: top; padding: .15em 1em .15em 0; font-variant-numeric: tabular-nums; }
table.list { width: 100%; font-size: 8.5pt; } table.list th { border-bottom: 1px solid #888; vertical-align: bottom; }
td.held { white-space: nowrap; }
table.list :is(td, th):nth-child(n + 7):nth-child(-n + 9), table.list :is(td, th):nth-child(n + 13) {
  text-align: right; }
table.list tbody { break-inside: avoid; border-bottom: 1px solid #ddd; }
table.list td { padding-right: .6em; }
table.moments { font-size: 11pt; }
table.moments td + td { font-weight: bold; } table.moments :last-child { padding-right: 0; }
.caution { border: 2px solid #D55E00; padding: 0 1em; margin: .8em 0; } .caution h2 { margin-top: .5em; }
ul, ol { margin: .4em 0; }
.foot { font-size: 8.5pt; border-top: 1px solid #888; padding-top: .3em; }
img { max-width: 100%; }
h2 { break-after: avoid; } li, .caution { break-inside: avoid; }
@media print {
  body { margin: 0; padding: 0; max-width: none; font-size: 9.5pt; line-height: 1.2; }
  th, td { padding-top: .05em; padding-bottom: .05em; }
  h2 { margin-top: .6em; } ul, ol { margin: .2em 0; } p.under { margin-bottom: .5em; }
  .caution { margin: .5em 0; } .caution h2 { margin-top: .2em; } .side img { flex-basis: 3.1in; }
  img.week { display: block; max-height: 150mm; margin: 0 auto; } h2.list { break-before: page; }
}
</style>
</head>
<body>
$body
</body>
</html>
""")


def page(title: str, body: str, *, landscape: bool = False) -> str:
    """A whole page; `body` is HTML already, `title` plain text."""
    size, width = ("A4 landscape", "270mm") if landscape else ("A4", "200mm")
    return PAGE.substitute(title=escape(title), size=size, width=width, body=body)


def card_html(card, picture_base64: str) -> str:
    """A pass card; `picture_base64` is a PNG."""
    body = [
        f"<h1>{escape(card.title)}</h1>",
        f'<p class="under">{escape(card.subtitle)}<br>{escape(card.reference)}</p>',
        f'<div class="side"><div><h2>Times (UTC)</h2>{table_html(MOMENT, card.times, "moments")}</div>',
        f'<img src="data:image/png;base64,{picture_base64}" alt="track over the sky" width="330"></div>',
        f"<h2>Radio and data</h2>{rows_html(radio_and_commands(card, named_in(card, *CARD_ROOM)))}",
        f'<div class="caution"><h2>Cautions</h2><ul>{items_html(card.cautions)}</ul></div>',
        f"<h2>{escape(card.search_after)}</h2><ol>{items_html(card.steps)}</ol>",
        f'<p class="foot">{escape(card.footer)}</p>',
    ]
    return page(f"{card.title}, {card.subtitle}", "\n".join(body))


def rows_html(rows) -> str:
    """(label, text) pairs as a table of two columns."""
    return "<table>" + "".join(f"<tr><th>{escape(a)}</th><td>{escape(b)}</td></tr>" for a, b in rows) + "</table>"


def items_html(lines) -> str:
    """Lines as list items."""
    return "".join(f"<li>{escape(line)}</li>" for line in lines)


def table_html(headings, rows, kind: str) -> str:
    """Rows of texts under headings; `kind` is the table's class."""
    head = "".join(f"<th>{escape(text)}</th>" for text in headings)
    body = "".join("<tr>" + "".join(map(_cell, row)) + "</tr>\n" for row in rows)
    return f'<table class="{kind}"><thead><tr>{head}</tr></thead>\n<tbody>\n{body}</tbody></table>'


def noted_table_html(headings, rows) -> str:
    """The same for rows with one text more than there are headings: a note, across and under its row."""
    head = "".join(f"<th>{escape(text)}</th>" for text in headings)
    groups = []
    for *texts, note in rows:
        under = f'<tr class="note"><td></td><td colspan="{len(texts) - 1}">! {escape(note)}</td></tr>\n' if note else ""
        groups.append(f"<tbody>\n<tr>{''.join(map(_cell, texts))}</tr>\n{under}</tbody>\n")
    return f'<table class="list"><thead><tr>{head}</tr></thead>\n{"".join(groups)}</table>'


def _cell(text: str) -> str:
    held = ' class="held"' if len(text) <= HELD_LETTERS else ""
    return f"<td{held}>{escape(text)}</td>"
