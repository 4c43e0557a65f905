"""The contact sheets of a store: pages of HTML on which a person looks over all results.

Pages that need a look come first, with what to look at. Each sheet holds as many as a person can
look over in one go, the first is the way in. They load nothing from elsewhere; pictures are linked.
Each page has the command that puts it on the over-read page.
"""

import itertools
from collections.abc import Iterable, Iterator, Mapping, Sequence
from html import escape
from typing import Any

from digitize import CAUTION
from digitize.archive.catalogue import FAILED, GOOD, LOOK

STATUS_WORDS = {LOOK: "needs a look", FAILED: "failed", GOOD: "good"}
ON_A_SHEET = 200  # at a second and a half each, five minutes
_SIGNS = {LOOK: "?", FAILED: "\N{MULTIPLICATION SIGN}", GOOD: "\N{CHECK MARK}"}
_HEAD = """<!doctype html>
<html lang="en"><head><meta charset="utf-8">
<meta name="viewport" content="width=device-width, initial-scale=1">
<meta http-equiv="Content-Security-Policy"
 content="default-src 'none'; style-src 'unsafe-inline'; img-src 'self' file:">
<title>Contact sheet</title><style>
body{font:15px/1.4 system-ui,sans-serif;margin:16px;color:#141414;background:#fff}
main{display:grid;grid-template-columns:repeat(auto-fill,minmax(min(390px,100%),1fr));gap:14px}
figure{margin:0;border:1px solid #bbb;border-left-width:6px;padding:8px}
figure.look{border-left-color:#d55e00}figure.failed{border-left-color:#141414}
figure.good{border-left-color:#00825f}
img{width:100%;height:auto}figcaption{overflow-wrap:anywhere}small{color:#555}
code{font-size:12px;user-select:all}nav a,nav b{margin-right:12px}
</style></head><body>
"""


def sheet_name(number: int) -> str:
    """Name of a sheet, from 1."""
    return "contact_sheet.html" if number == 1 else f"contact_sheet.{number}.html"


def contact_sheets(
    rows: Iterable[Mapping[str, Any]], counts: Mapping[str, int]
) -> Iterator[tuple[str, bytes]]:
    """Yield name and content of each sheet, as UTF-8 HTML; there is always one.

    Parameters
    ----------
    rows : iterable of mapping
        As `Catalogue.rows` gives them.
    counts : mapping
        Pages by status.
    """
    sheets = max(-(-sum(counts.values()) // ON_A_SHEET), 1)
    rest = iter(rows)
    for number in range(1, sheets + 1):
        yield (
            sheet_name(number),
            _sheet(list(itertools.islice(rest, ON_A_SHEET)), counts, number, sheets),
        )


def _sheet(
    rows: Sequence[Mapping[str, Any]], counts: Mapping[str, int], number: int, sheets: int
) -> bytes:
    told = ", ".join(f"{counts.get(status, 0)} {word}" for status, word in STATUS_WORDS.items())
    which = f" {number} of {sheets}" if sheets > 1 else ""
    parts = [
        f"{_HEAD}<h1>Contact sheet{which}</h1><p>{told}.</p><p>{escape(CAUTION)}</p>",
        "<p>Click a picture to see it in full. The line below it, run in the folder of this sheet, "
        "puts that page on the over-read page; <code>measure overread .</code> does so with all "
        "that need a look.</p>",
        _links(number, sheets),
        "<main>\n",
        *(_figure(row) for row in rows),
        "</main>",
        _links(number, sheets),
        "</body></html>\n",
    ]
    return "".join(parts).encode()


def _links(number: int, sheets: int) -> str:
    """The way to the first and last sheet and to those beside this one."""
    if sheets == 1:
        return ""
    shown = sorted({1, number - 1, number, number + 1, sheets} & set(range(1, sheets + 1)))
    links = (
        f"<b>{n}</b>" if n == number else f'<a href="{sheet_name(n)}">Sheet {n}</a>' for n in shown
    )
    return f"<nav>{''.join(links)}</nav>"


def _figure(row: Mapping[str, Any]) -> str:
    """One page: picture, status, what to look at, how to over-read it."""
    status = row["status"]
    name = f"{row['sha256'][:12]}, page {row['page']}"
    said = f"<b>{_SIGNS[status]} {STATUS_WORDS[status]}</b> <small>{escape(name)}</small>"
    command = ""
    if row["stem"] is not None:
        stem = escape(row["stem"], quote=True)
        picture = f'<a href="{stem}.overlay.png"><img loading="lazy" src="{stem}.thumb.jpg"'
        said = f'{picture} alt="overlay of {escape(name)}"></a>{said}'
        leads = "1 lead" if row["leads"] == 1 else f"{row['leads']} leads"
        said += (
            f"<br>{leads}, {escape(str(row['layout']))}, {row['speed_mm_s']:g} mm/s "
            f"({row['speed_source']}), {row['gain_mm_mv']:g} mm/mV ({row['gain_source']})"
        )
        command = f"<br><code>measure overread {stem}.json</code>"
    reason = f"<br>{escape(row['reason'])}" if row["reason"] else ""
    return f'<figure class="{status}">{said}<figcaption>{reason}{command}</figcaption></figure>\n'
