"""The few HTML elements that the pages are made of; every word is escaped here or by its maker."""

from collections.abc import Iterable
from html import escape

from measure.report.style import CSS
from measure.wording import NOTICE, SIGNS


def document(title: str, headline: Iterable[str], body: str) -> str:
    """A complete page that loads nothing from outside and runs no script."""
    return (
        '<!DOCTYPE html>\n<html lang="en"><head><meta charset="utf-8">'
        '<meta name="viewport" content="width=device-width, initial-scale=1">'
        '<meta http-equiv="Content-Security-Policy" content="default-src \'none\'; '
        "style-src 'unsafe-inline'; img-src data:\">"
        f"<title>{escape(title)}</title><style>{CSS}</style></head><body>"
        f"<h1>{escape(title)}</h1>"
        f'<p class="notice">{escape(NOTICE)}</p>'
        f'<div class="headline">{paragraphs(headline)}</div>'
        f"{body}</body></html>\n"
    )


def section(title: str, body: str) -> str:
    """A question and what answers it, already as HTML."""
    return f"<section><h2>{escape(title)}</h2>{body}</section>"


def paragraphs(lines: Iterable[str]) -> str:
    """One paragraph for each line."""
    return "".join(f"<p>{escape(line)}</p>" for line in lines)


def prose(lines: Iterable[str]) -> str:
    """Lines run together as sentences."""
    return f"<p>{escape(' '.join(line.rstrip('.') + '.' for line in lines))}</p>"


def bullets(lines: Iterable[str]) -> str:
    """Lines as a list; those that ask for a look stand out."""
    items = "".join(
        f'<li class="look">{escape(line)}</li>'
        if line.startswith("LOOK")
        else f"<li>{escape(line)}</li>"
        for line in lines
    )
    return f"<ul>{items}</ul>"


def table(headings: Iterable[str], rows: Iterable[str]) -> str:
    """A table of rows that are HTML already."""
    head = "".join(f"<th>{escape(heading)}</th>" for heading in headings)
    return f"<table><thead><tr>{head}</tr></thead><tbody>{''.join(rows)}</tbody></table>"


def mark(result: str) -> str:
    """Sign and word of a result."""
    kind = result.replace(" ", "-")
    return f'<span class="result {kind}">{SIGNS[result]} {escape(result)}</span>'
