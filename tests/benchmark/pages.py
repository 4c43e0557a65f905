"""The fixed set of pages: a table of families, each page from its own seed."""

from collections.abc import Callable, Iterator
from dataclasses import dataclass, replace
from functools import partial

from tests.drawn.heart import Recording, record_model
from tests.drawn.records import ludb_folder, read_ludb
from tests.drawn.spec import PageSpec
from tests.drawn.variety import vary_heart, vary_page, vary_scan


@dataclass(frozen=True)
class Case:
    """One page of the benchmark, not yet drawn."""

    name: str  # also the file's name
    family: str
    source: str  # "model" or "ludb"
    number: int  # seed of the model heart, or number of the record
    spec: PageSpec

    def recording(self) -> Recording:
        """The ECG to print."""
        if self.source == "ludb":
            return read_ludb(self.number)
        return record_model(vary_heart(self.number))


def _scan(seed: int, dpi: tuple[int, ...], mode: str) -> PageSpec:
    return replace(vary_page(seed), capture=vary_scan(seed, dpi, mode=mode))


# Family -> (pages, first seed, how a seed becomes a page).
FAMILIES: dict[str, tuple[int, int, Callable[[int], PageSpec]]] = {
    "scan colour": (24, 1000, partial(_scan, dpi=(200, 240, 300, 300, 400, 600), mode="colour")),
    "scan grey": (12, 2000, partial(_scan, dpi=(200, 300, 300, 400), mode="grey")),
    "low dpi": (12, 3000, partial(_scan, dpi=(100, 120, 150), mode="colour")),
}


def cases(families: list[str] | None = None, only: int | None = None) -> Iterator[Case]:
    """Yield the pages of the given families (all by default), at most `only` of each.

    Every second page holds a model ECG, the others odd records of LUDB where they are at hand.
    """
    real = ludb_folder() is not None
    for family, (count, first, make) in FAMILIES.items():
        if families and not any(family.startswith(wanted) for wanted in families):
            continue
        for k in range(min(count, only) if only else count):
            seed = first + k
            spec = make(seed)
            from_ludb = real and k % 2 == 1
            number = 2 * ((seed * 7919) % 100) + 1 if from_ludb else seed
            suffix = _suffix(spec)
            name = f"{family.replace(' ', '_')}_{k:02d}_{spec.layout.name}{suffix}"
            yield Case(name, family, "ludb" if from_ludb else "model", number, spec)


def _suffix(spec: PageSpec) -> str:
    if spec.capture.mode in ("bilevel", "diffused"):
        return ".tif"
    return ".png" if spec.capture.jpeg_quality is None else ".jpg"
