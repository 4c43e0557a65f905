"""The fixed set of pages: a table of families, each page from its own seed."""

from collections.abc import Callable, Iterator
from dataclasses import dataclass, replace
from functools import partial

from tests.drawn.heart import Recording, record_model
from tests.drawn.records import ludb_folder, read_ludb
from tests.drawn.spec import PageSpec, WearSpec
from tests.drawn.variety import (
    crowd,
    vary_fax,
    vary_heart,
    vary_page,
    vary_photo,
    vary_scan,
    vary_wear,
)


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


def _scan(seed: int, dpi: tuple[int, ...], mode: str = "colour") -> PageSpec:
    return replace(vary_page(seed), capture=vary_scan(seed, dpi, mode=mode))


def _rare(seed: int) -> PageSpec:
    """Layouts that are seldom met, each in turn."""
    page = vary_page(seed, arrangement=RARE[seed % len(RARE)])
    return replace(page, capture=vary_scan(seed, (200, 300)))


def _fax(seed: int, lines_per_inch: float) -> PageSpec:
    speckle = WearSpec(speckle=0.08 * (seed % 3))
    return replace(vary_page(seed), capture=vary_fax(seed, lines_per_inch), wear=speckle)


def _photo(seed: int) -> PageSpec:
    return replace(vary_page(seed), capture=vary_photo(seed))


def _worn(seed: int) -> PageSpec:
    return replace(_scan(seed, (200, 240, 300)), wear=vary_wear(seed))


def _crossing(seed: int) -> PageSpec:
    page = _scan(seed, (200, 300))
    return replace(page, layout=crowd(page.layout, seed))


RARE = (
    (6, 1, 0, "limb"), (6, 1, 0, "chest"), (1, 1, 1, "usual"), (4, 3, 1, "usual"),
    (3, 4, 2, "usual"), (12, 1, 0, "cabrera"), (6, 2, 1, "cabrera"), (4, 3, 0, "usual"),
)  # fmt: skip

# Family -> (pages, first seed, how a seed becomes a page).
FAMILIES: dict[str, tuple[int, int, Callable[[int], PageSpec]]] = {
    "scan colour": (40, 1000, partial(_scan, dpi=(200, 240, 300, 300, 400, 600))),
    "scan grey": (20, 2000, partial(_scan, dpi=(200, 300, 300, 400), mode="grey")),
    "low dpi": (20, 3000, partial(_scan, dpi=(100, 120, 150))),
    "rare layout": (16, 4000, _rare),
    "fax 204x196": (24, 5000, partial(_fax, lines_per_inch=196.0)),
    "fax 204x98": (16, 6000, partial(_fax, lines_per_inch=98.0)),
    "photo": (30, 7000, _photo),
    "worn": (24, 8000, _worn),
    "crossing": (16, 9000, _crossing),
    "vector pdf": (12, 10000, vary_page),
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
            suffix = _suffix(family, seed, spec)
            name = f"{family.replace(' ', '_')}_{k:02d}_{spec.layout.name}{suffix}"
            yield Case(name, family, "ludb" if from_ludb else "model", number, spec)


def _suffix(family: str, seed: int, spec: PageSpec) -> str:
    if family == "vector pdf" or (seed % 10 == 9 and spec.capture.jpeg_quality is not None):
        return ".pdf"
    if spec.capture.mode in ("bilevel", "diffused"):
        return ".tif"
    return ".png" if spec.capture.jpeg_quality is None else ".jpg"
