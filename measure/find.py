"""Questions to a store: `qrs_ms >= 150 and lbbb_strict = 'met'`.

The words of a question are checked against the known names and turned into SQL of our own, with
every value as a parameter: nothing from outside is SQL. What was not measured meets no comparison
and not its opposite either; `is missing` asks for it.

    question    any { "or" any }
    any         one { "and" one }
    one         "not" one | "(" question ")" | name comparison
    comparison  ( = | != | < | <= | > | >= ) ( number | 'word' ) | "is" ( "known" | "missing" )
"""

import csv
import difflib
import io
import re
from collections.abc import Iterator, Sequence
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

from digitize.archive.catalogue import opened
from digitize.archive.store import CATALOGUE
from digitize.errors import UnreadableFile
from measure.questions import FAMILIES, RHYTHM_KEYS, WIDTH_KEYS

NUMBERS_OF_PAGE = (
    *("page", "leads", "speed_mm_s", "gain_mm_mv", "read_share", "checks_failed"),
    *("width_px", "height_px", "seconds", "peak_mb"),
)
WORDS_OF_PAGE = ("sha256", "status", "layout", "timing", "speed_source", "gain_source", "stem")
INTERVALS = (*RHYTHM_KEYS, *WIDTH_KEYS)
FINDINGS = tuple(key for _, keys in FAMILIES for key in keys)
NAMES = (
    *(*NUMBERS_OF_PAGE, *WORDS_OF_PAGE),
    *(*INTERVALS, *(f"{name}_se" for name in INTERVALS), *FINDINGS),
)
_ALWAYS = ("sha256", "page", "stem", "status")

_TOKEN = re.compile(
    r"\s*(?:(?P<number>-?\d+(?:\.\d+)?)|(?P<word>'(?:[^']|'')*')|(?P<name>[A-Za-z_]\w*)"
    r"|(?P<sign><=|>=|!=|=|<|>|\(|\)))"
)
_SIGNS = ("=", "!=", "<", "<=", ">", ">=")
_DEEPEST = 50  # brackets and "not" within one another


class QuestionError(ValueError):
    """A question that is not understood; the text is fit to be shown to the person."""


@dataclass(frozen=True)
class Question:
    """Checked SQL for the condition, its parameters, and the names it asks about."""

    sql: str = "1"
    values: tuple[Any, ...] = ()
    names: tuple[str, ...] = ()


def find(
    store: Path,
    question: Question,
    *,
    sort: str | None = None,
    columns: Sequence[str] = (),
) -> tuple[tuple[str, ...], list[tuple[Any, ...]]]:
    """Return column names and the pages of a store that a question is true of.

    Parameters
    ----------
    store : Path
        It is opened for reading alone.
    question : Question
        From `understand`.
    sort : str, optional
        Name to sort by, a "-" before it for the largest first; missing ones come last.
    columns : sequence of str
        Shown beside the page's own and those that the question asks about.

    Raises
    ------
    QuestionError
        A name is not known.
    InputError
        There is no store, or it holds no readings.
    """
    order = (sort or "").removeprefix("-")
    shown = tuple(dict.fromkeys((*_ALWAYS, *question.names, *columns, *([order] if order else ()))))
    expressions, values = zip(*(_value(name) for name in shown), strict=True)
    sql = f"SELECT {', '.join(expressions)} FROM page p WHERE {question.sql} ORDER BY "
    ordering, order_values = _value(order) if order else ("p.sha256", ())
    down = " DESC" if (sort or "").startswith("-") else ""
    sql += f"{ordering} IS NULL, {ordering}{down}, p.sha256, p.options, p.page"
    parameters = [v for part in values for v in part]
    with opened(store / CATALOGUE, read_only=True) as catalogue:
        if not catalogue.db.execute(
            "SELECT 1 FROM sqlite_master WHERE name = 'measured'"
        ).fetchone():
            raise UnreadableFile("no page of the store was measured: run measure archive first")
        rows = catalogue.db.execute(
            sql, (*parameters, *question.values, *order_values, *order_values)
        ).fetchall()
    return shown, rows


def to_csv(names: Sequence[str], rows: Sequence[Sequence[Any]]) -> str:
    """A table as CSV (RFC 4180), blank where a value is missing."""
    buffer = io.StringIO()
    writer = csv.writer(buffer, lineterminator="\n")
    writer.writerow(names)
    writer.writerows(rows)
    return buffer.getvalue()


def understand(text: str) -> Question:
    """Return a question as checked SQL.

    Raises
    ------
    QuestionError
        It is not of the form above, or asks for a name that is not known.
    """
    reader = _Reader(list(_tokens(text)))
    sql = reader.question(0)
    if reader.tokens:
        raise QuestionError(f"'{reader.tokens[0][1]}' is not expected there")
    return Question(sql, tuple(reader.values), tuple(dict.fromkeys(reader.names)))


def _tokens(text: str) -> Iterator[tuple[str, str]]:
    """Kind and text of each word of a question."""
    at = 0
    while text[at:].strip():
        match = _TOKEN.match(text, at)
        if match is None:
            raise QuestionError(f"'{text[at:].strip()[:20]}' is not understood")
        at = match.end()
        yield str(match.lastgroup), match[str(match.lastgroup)]


def _value(name: str) -> tuple[str, tuple[str, ...]]:
    """SQL for one value of page `p`, with its parameters."""
    if name not in NAMES:
        near = difflib.get_close_matches(name, NAMES, n=3) or ["qrs_ms", "lbbb_strict", "status"]
        raise QuestionError(f"'{name}' is not known here: {', '.join(near)}?")
    if name in NUMBERS_OF_PAGE or name in WORDS_OF_PAGE:
        return f"p.{name}", ()
    column = "word" if name in FINDINGS else "se" if name.endswith("_se") else "number"
    return (
        f"(SELECT m.{column} FROM measured m WHERE m.sha256 = p.sha256"
        " AND m.options = p.options AND m.page = p.page AND m.name = ?)",
        (name.removesuffix("_se") if column == "se" else name,),
    )


@dataclass
class _Reader:
    """The words of a question that are still to be read, and what was gathered from the others."""

    tokens: list[tuple[str, str]]
    values: list[Any] = field(default_factory=list)
    names: list[str] = field(default_factory=list)

    def question(self, depth: int) -> str:
        if depth > _DEEPEST:
            raise QuestionError("too many brackets within one another")
        parts = [self._any(depth)]
        while self._take("or"):
            parts.append(self._any(depth))
        return parts[0] if len(parts) == 1 else f"({' OR '.join(parts)})"

    def _any(self, depth: int) -> str:
        parts = [self._one(depth)]
        while self._take("and"):
            parts.append(self._one(depth))
        return parts[0] if len(parts) == 1 else f"({' AND '.join(parts)})"

    def _one(self, depth: int) -> str:
        if depth > _DEEPEST:
            raise QuestionError("too many brackets within one another")
        if self._take("not"):
            return f"(NOT {self._one(depth + 1)})"
        if self._take("("):
            inside = self.question(depth + 1)
            if not self._take(")"):
                raise QuestionError("a bracket is not closed")
            return inside
        kind, name = self._next("a name")
        if kind != "name":
            raise QuestionError(f"{name} stands where a name is expected")
        sql, parameters = _value(name)
        self.names.append(name)
        self.values += parameters
        return self._comparison(name, sql)

    def _comparison(self, name: str, sql: str) -> str:
        _, sign = self._next(f"a comparison after {name}")
        if sign.lower() == "is":
            for word, test in (("missing", "IS NULL"), ("known", "IS NOT NULL")):
                if self._take(word):
                    return f"({sql} {test})"
            raise QuestionError("after 'is' comes 'known' or 'missing'")
        if sign not in _SIGNS:
            raise QuestionError(f"after {name} comes one of {' '.join(_SIGNS)}, not '{sign}'")
        kind, text = self._next(f"a value after {name} {sign}")
        wanted = "word" if name in FINDINGS or name in WORDS_OF_PAGE else "number"
        if kind != wanted:
            what = "a word in quotes, such as 'met'" if wanted == "word" else "a number"
            raise QuestionError(f"{name} is compared with {what}, not with {text}")
        self.values.append(float(text) if kind == "number" else text[1:-1].replace("''", "'"))
        return f"({sql} {sign} ?)"

    def _next(self, wanted: str) -> tuple[str, str]:
        if not self.tokens:
            raise QuestionError(f"{wanted} is missing at the end")
        return self.tokens.pop(0)

    def _take(self, word: str) -> bool:
        """Whether the next word is this one, which is then read."""
        if self.tokens and self.tokens[0][0] != "word" and self.tokens[0][1].lower() == word:
            self.tokens.pop(0)
            return True
        return False
