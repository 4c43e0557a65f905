"""The contact sheet of a store: one page of HTML on which a person looks over all results.

Pages that need a look come first, with what to look at. It loads nothing from elsewhere; pictures
are linked, so that it stays small.
"""

from collections.abc import Iterable, Mapping
from html import escape
from typing import Any

from digitize import CAUTION
from digitize.archive.catalogue import FAILED, GOOD, LOOK

STATUS_WORDS = {LOOK: "needs a look", FAILED: "failed", GOOD: "good"}
_SIGNS = {LOOK: "?", FAILED: "\N{MULTIPLICATION SIGN}", GOOD: "\N{CHECK MARK}"}
_HEAD = """<!doctype html>
<html lang="en"><head><meta charset="utf-8"><title>Contact sheet</title><style>
body{font:15px/1.4 system-ui,sans-serif;margin:16px;color:#141414;background:#fff}
main{display:grid;grid-template-columns:repeat(auto-fill,minmax(420px,1fr));gap:14px}
figure{margin:0;border:1px solid #bbb;border-left-width:6px;padding:8px}
figure.look{border-left-color:#d55e00}figure.failed{border-left-color:#141414}
figure.good{border-left-color:#00825f}
img{width:100%;height:auto}figcaption{overflow-wrap:anywhere}small{color:#555}
</style></head><body>
"""


def contact_sheet(rows: Iterable[Mapping[str, Any]], counts: Mapping[str, int]) -> bytes:
    """Return the page as UTF-8 HTML.

    Parameters
    ----------
    rows : iterable of mapping
        As `Catalogue.rows` gives them.
    counts : mapping
        Pages by status.
    """
    told = ", ".join(f"{counts.get(status, 0)} {word}" for status, word in STATUS_WORDS.items())
    parts = [_HEAD, f"<h1>Contact sheet</h1><p>{told}.</p><p>{escape(CAUTION)}</p><main>\n"]
    parts += [_figure(row) for row in rows]
    parts.append("</main></body></html>\n")
    return "".join(parts).encode()


def _figure(row: Mapping[str, Any]) -> str:
    """One page: picture, status, what to look at."""
    status = row["status"]
    name = f"{row['sha256'][:12]}, page {row['page']}"
    said = f"<b>{_SIGNS[status]} {STATUS_WORDS[status]}</b> <small>{escape(name)}</small>"
    if row["stem"] is not None:
        stem = escape(row["stem"], quote=True)
        picture = f'<a href="{stem}.overlay.png"><img loading="lazy" src="{stem}.thumb.jpg"'
        said = f'{picture} alt="overlay of {escape(name)}"></a>{said}'
        said += (
            f"<br>{row['leads']} leads, {escape(str(row['layout']))}, {row['speed_mm_s']:g} mm/s "
            f"({row['speed_source']}), {row['gain_mm_mv']:g} mm/mV ({row['gain_source']})"
        )
    reason = f"<br>{escape(row['reason'])}" if row["reason"] else ""
    return f'<figure class="{status}">{said}<figcaption>{reason}</figcaption></figure>\n'
