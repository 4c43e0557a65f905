"""Questions to a store: `qrs_ms >= 150 and lbbb_strict = 'met'`.

The words of a question are checked against the known names and turned into SQL of our own, with
every value as a parameter: nothing from outside is SQL. What was not measured meets no comparison
and not its opposite either; `is missing` asks for it.

    question    any { "or" any }
    any         one { "and" one }
    one         "not" one | "(" question ")" | name comparison
    comparison  ( = | != | < | <= | > | >= ) ( number | 'word' ) | "is" ( "known" | "missing" )
"""

import difflib
import re
from collections.abc import Iterator, Mapping, Sequence
from contextlib import contextmanager
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

from digitize.archive.catalogue import opened
from digitize.archive.store import CATALOGUE
from digitize.errors import UnreadableFile
from measure.catalogue import COLUMNS, ERRORS, FINDINGS, INTERVALS, columns_of

_OF_CHART = "(SELECT c.{} FROM chart c WHERE c.sha256 = p.sha256 AND c.page IN (0, p.page))"
WHOLE_NUMBERS = ("page", "leads", "checks_failed", "width_px", "height_px")
NUMBERS_OF_PAGE = (
    *WHOLE_NUMBERS,
    *("speed_mm_s", "gain_mm_mv", "read_share", "seconds", "peak_mb"),
)
WORDS_OF_PAGE = (
    *("sha256", "options", "status", "reason", "stem", "layout", "timing"),
    *("speed_source", "gain_source", "version", "header", "header_fields"),
)
NAMES: Mapping[str, str] = {  # of everything that can be asked, with its SQL
    **{name: f"p.{name}" for name in (*NUMBERS_OF_PAGE, *WORDS_OF_PAGE)},
    **{name: f"r.{name}" for name in (*INTERVALS, *ERRORS, *FINDINGS)},
    **{name: _OF_CHART.format(name) for name in ("patient", "date", "sex", "age_years")},
    "reading_reason": "r.reason",
    "reading_version": "r.version",
}
NUMBERS = frozenset((*NUMBERS_OF_PAGE, *INTERVALS, *ERRORS, "age_years"))
EVERYTHING = "all"  # in place of the names of columns
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


@contextmanager
def find(
    store: Path,
    question: Question,
    *,
    sort: str | None = None,
    columns: Sequence[str] = (),
) -> Iterator[tuple[tuple[str, ...], Iterator[tuple[Any, ...]]]]:
    """Column names and, row by row, the pages of a store that a question is true of.

    Parameters
    ----------
    store : Path
        It is opened for reading alone.
    question : Question
        From `understand`.
    sort : str, optional
        Name to sort by, a "-" before it for the largest first; missing ones come last.
    columns : sequence of str
        Shown beside the page's own and those that the question asks about; `EVERYTHING` alone:
        all there are.

    Raises
    ------
    QuestionError
        A name is not known.
    InputError
        There is no store, or it holds no readings.
    """
    order = (sort or "").removeprefix("-")
    wanted = NAMES if tuple(columns) == (EVERYTHING,) else columns
    shown = tuple(dict.fromkeys((*_ALWAYS, *question.names, *wanted, *([order] if order else ()))))
    ordering = _sql(order) if order else "p.sha256"
    down = " DESC" if (sort or "").startswith("-") else ""
    sql = f"""
        SELECT {", ".join(map(_sql, shown))} FROM page p
        LEFT JOIN reading r USING (sha256, options, page) WHERE {question.sql}
        ORDER BY {ordering} IS NULL, {ordering}{down}, p.sha256, p.options, p.page
    """
    with opened(store / CATALOGUE, read_only=True) as catalogue:
        present = columns_of(catalogue.db)
        if not present:
            raise UnreadableFile("no page of the store was measured: run measure archive first")
        if not COLUMNS.keys() <= present:
            raise UnreadableFile("the readings are of an earlier version: run measure archive once")
        yield shown, catalogue.db.execute(sql, question.values)


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


def _sql(name: str) -> str:
    """SQL for one value of a page."""
    if name not in NAMES:
        near = difflib.get_close_matches(name, NAMES, n=3) or ["qrs_ms", "lbbb_strict", "status"]
        raise QuestionError(f"'{name}' is not known here: {', '.join(near)}?")
    return NAMES[name]


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
        sql = _sql(name)
        self.names.append(name)
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
        wanted = "number" if name in NUMBERS else "word"
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
