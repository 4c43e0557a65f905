"""One call of `measure find`: the answer as a table, a number or a histogram."""

import sys
from dataclasses import dataclass
from pathlib import Path

from digitize.errors import shown
from digitize.safe_write import write_files, written
from measure.find import Question, find, understand
from measure.histogram import as_page, as_text, histogram
from measure.tables import write_csv, write_parquet

_WRITERS = {"csv": write_csv, "parquet": write_parquet}


@dataclass(frozen=True)
class Wanted:
    """What was asked, and how the answer is given; `to` is "csv", "parquet" or "count"."""

    where: str | None
    sort: str | None
    columns: tuple[str, ...]
    to: str
    plot: str | None
    output: Path | None
    replace: bool


def answer(store: Path, wanted: Wanted) -> None:
    """Print or write the answer to one question.

    Raises
    ------
    QuestionError
        The question is not understood, or a name is not known.
    InputError
        There is no store, it was not measured, or the file cannot be written.
    """
    question = Question() if wanted.where is None else understand(wanted.where)
    if wanted.plot is not None:
        _plot(store, question, wanted, wanted.plot)
        return
    with find(store, question, sort=wanted.sort, columns=wanted.columns) as (names, rows):
        if wanted.to == "count":
            print(sum(1 for _ in rows))
        elif wanted.output is None:
            sys.stdout.flush()
            write_csv(sys.stdout.buffer, names, rows)
        else:
            with written(wanted.output, replace=wanted.replace) as file:
                _WRITERS[wanted.to](file, names, rows)
            print(f"Written: {shown(wanted.output)}")


def _plot(store: Path, question: Question, wanted: Wanted, name: str) -> None:
    with find(store, question, columns=(name,)) as (names, rows):
        column = names.index(name)
        found = histogram(name, (row[column] for row in rows))
    if wanted.output is None:
        print(as_text(found), end="")
        return
    page = as_page(found, wanted.where or "every page of the store")
    write_files({wanted.output: page.encode()}, replace=wanted.replace)
    print(f"Written: {shown(wanted.output)}")
