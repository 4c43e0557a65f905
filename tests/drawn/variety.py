"""Pages as different from each other as real ones: everything drawn by lot from one seed.

The families say how a page reached us (scan, fax, photograph ...); within a family paper, pen,
lettering, layout and scale are free, as long as the traces fit the sheet.
"""

from dataclasses import replace

import numpy as np

from tests.drawn import conduction
from tests.drawn.heart import HeartSpec
from tests.drawn.spec import (
    CaptureSpec,
    Colour,
    LayoutSpec,
    LetterSpec,
    PageSpec,
    PaperSpec,
    PenSpec,
    PhotoSpec,
    WearSpec,
)

A4, A4_UPRIGHT, LETTER, LONG = (297.0, 210.0), (210.0, 297.0), (279.4, 215.9), (330.0, 100.0)
GRID_COLOURS: tuple[Colour, ...] = (
    (240, 150, 140), (228, 110, 110), (244, 176, 190), (245, 185, 130), (160, 200, 165),
    (150, 175, 220), (180, 180, 180), (120, 120, 120), (200, 160, 200), (205, 190, 150),
)  # fmt: skip
PEN_COLOURS: tuple[Colour, ...] = (
    (15, 15, 15),
    (30, 30, 35),
    (25, 30, 90),
    (70, 70, 75),
    (70, 45, 30),
)
PAPER_COLOURS: tuple[Colour, ...] = (
    (255, 255, 255), (255, 250, 246), (250, 252, 250), (253, 248, 232), (255, 240, 240),
)  # fmt: skip
FONTS = ("sans", "bold", "oblique", "serif", "serif bold", "mono", "times", "times bold", "stroke",
         "stroke double")  # fmt: skip
PLACES = ("above", "above", "below", "left", "start")

_ASIDES = (
    "Ward 4, bed 2", "Requested by the clinic", "Rate 71 /min", "PR 162 ms   QRS 98 ms",
    "Recorded at rest, supine", "Copy for the family doctor", "Unconfirmed", "Leads as standard",
)  # fmt: skip

# (rows, columns, strips, order): how often each is drawn is how often it stands here.
ARRANGEMENTS: tuple[tuple[int, int, int, str], ...] = (
    (3, 4, 1, "usual"), (3, 4, 1, "usual"), (3, 4, 1, "usual"), (3, 4, 3, "usual"),
    (3, 4, 3, "usual"), (3, 4, 0, "usual"), (3, 4, 2, "usual"), (6, 2, 0, "usual"),
    (6, 2, 1, "usual"), (6, 2, 0, "cabrera"), (12, 1, 0, "usual"), (12, 1, 0, "cabrera"),
    (4, 3, 1, "usual"), (3, 4, 1, "cabrera"),
)  # fmt: skip


def vary_page(seed: int, *, arrangement: tuple[int, int, int, str] | None = None) -> PageSpec:
    """Return a scanned page of free choice in everything but its capture."""
    rng = np.random.default_rng([seed, 3])
    chosen = arrangement or ARRANGEMENTS[rng.integers(len(ARRANGEMENTS))]
    size_mm = A4 if rng.random() < 0.7 else LETTER
    if chosen[:2] in ((12, 1), (6, 2)) and rng.random() < 0.35:
        size_mm = A4_UPRIGHT
    if chosen[:2] == (1, 1):
        size_mm = LONG
    paper = _paper(rng, size_mm)
    layout = _layout(rng, chosen, paper)
    letters = _letters(rng, layout)
    pen = PenSpec(float(rng.uniform(0.22, 0.45)), _pick(rng, PEN_COLOURS), rng.choice([0.0, 0.15]))
    if rng.random() < 0.7:
        letters = replace(letters, colour=pen.colour)
    return PageSpec(paper=paper, pen=pen, letters=letters, layout=layout, seed=seed)


def vary_heart(seed: int) -> HeartSpec:
    """Return a model heart of free choice."""
    rng = np.random.default_rng([seed, 4])
    name = str(rng.choice(list(conduction.PATTERNS)))
    rhythm = "sinus" if rng.random() < 0.85 else "fibrillation"
    early = tuple(int(k) for k in rng.integers(2, 9, rng.integers(0, 3)))
    ventricular = rng.random() < 0.4
    return HeartSpec(
        conduction=name,
        rhythm="paced" if name == "paced" else rhythm,
        rate_bpm=float(rng.uniform(52, 105)),
        early_atrial=() if ventricular or rhythm != "sinus" or name == "paced" else early,
        early_ventricular=early if ventricular and name != "paced" else (),
        pr_ms=float(rng.uniform(130, 215)),
        size=float(rng.choice([0.45, 0.8, 1.0, 1.0, 1.2, 1.5])),
        turn_deg=float(rng.uniform(-12, 12)),
        wander_mv=float(rng.choice([0.0, 0.02, 0.05])),
        muscle_mv=float(rng.choice([0.0, 0.005, 0.012])),
        seed=seed,
    )


def vary_scan(
    seed: int, dpi: tuple[int, ...], *, mode: str = "colour", tilt_deg: float = 2.0
) -> CaptureSpec:
    """Return a flat-bed scan at one of the given resolutions."""
    rng = np.random.default_rng([seed, 5])
    chosen = float(rng.choice(dpi))
    return CaptureSpec(
        dpi=(chosen, chosen),
        tilt_deg=float(rng.uniform(-tilt_deg, tilt_deg)),
        turn_deg=int(rng.choice([0, 0, 0, 0, 0, 0, 90, 180, 270])),
        blur_mm=float(rng.uniform(0.02, 0.08)),
        noise=float(rng.uniform(0.5, 4.0)),
        mode=mode,
        jpeg_quality=int(rng.integers(60, 95)) if rng.random() < 0.7 else None,
        dpi_tag=str(rng.choice(["right", "right", "right", "absent"])),
    )


def _pick(rng: np.random.Generator, choices: tuple[Colour, ...]) -> Colour:
    return choices[rng.integers(len(choices))]


def _paper(rng: np.random.Generator, size_mm: tuple[float, float]) -> PaperSpec:
    """A sheet ruled all over, or with a ruled frame inside white margins."""
    offset_mm = (float(rng.uniform(4, 14)), float(rng.uniform(4, 14)))
    frame = None
    if rng.random() < 0.35:
        right = 5 * ((size_mm[0] - offset_mm[0] - 5) // 5)
        bottom = 5 * ((size_mm[1] - offset_mm[1] - rng.uniform(5, 18)) // 5)
        frame = (0.0, 5.0 * rng.integers(2, 6), right, bottom)
    return PaperSpec(
        size_mm=size_mm,
        offset_mm=offset_mm,
        grid=str(rng.choice(["lines", "lines", "lines", "lines", "dots", "dotted", "coarse"])),
        colour=_pick(rng, PAPER_COLOURS),
        grid_colour=_pick(rng, GRID_COLOURS),
        fine_mm=float(rng.uniform(0.08, 0.2)),
        coarse_mm=float(rng.uniform(0.15, 0.35)),
        fine_amount=float(rng.uniform(0.35, 0.9)),
        coarse_amount=float(rng.uniform(0.7, 1.0)),
        frame_mm=frame,
    )


def _layout(
    rng: np.random.Generator, arrangement: tuple[int, int, int, str], paper: PaperSpec
) -> LayoutSpec:
    """Rows and columns fitted to the sheet."""
    rows, columns, strips, order = arrangement
    speed = float(rng.choice([25, 25, 25, 25, 25, 50, 12.5])) if columns < 4 else 25.0
    mark = str(rng.choice(["left", "left", "left", "right", "none", "middle"]))
    gap_mm = float(rng.choice([0, 0, 0, 4, 8])) if columns > 1 else 0.0
    if mark == "middle":
        gap_mm = 0.2 * speed + 6 if columns > 1 else 0.0
        mark = "middle" if columns > 1 else "left"
    room_mm = 0.2 * speed + 6
    left_mm = max(room_mm + 8 - paper.offset_mm[0], 2.0) + float(rng.uniform(0, 3))
    right_mm = paper.size_mm[0] - paper.offset_mm[0] - (room_mm + 4 if mark == "right" else 5)
    panel_s = ((right_mm - left_mm) - gap_mm * (columns - 1)) / columns / speed
    panel_s = min(panel_s, (10 - (columns - 1) * gap_mm / speed) / columns)
    panel_s = np.floor(panel_s * 20) / 20
    top_mm = (paper.frame_mm[1] if paper.frame_mm else 18.0) + 4.0
    bottom_mm = paper.frame_mm[3] if paper.frame_mm else paper.size_mm[1] - paper.offset_mm[1] - 10
    count = rows + (strips if rows * columns > 1 else 0)
    pitch_mm = (bottom_mm - top_mm) / count
    names = ("II", "V1", "V5") if rng.random() < 0.5 else ("V1", "II", "V5")
    other = str(rng.choice(["II", "II", "II", "V1", "III", "V5", "aVF"]))
    simultaneous = columns > 1 and rng.random() < 0.15
    gain = 10.0 if pitch_mm > 20 else float(rng.choice([10.0, 5.0]))
    return LayoutSpec(
        rows=rows,
        columns=columns,
        strips=(other,) if strips == 1 or rows * columns == 1 else names[:strips],
        order=order,
        timing="simultaneous" if simultaneous else "consecutive",
        speed_mm_s=speed,
        gain_mm_mv=20.0 if rng.random() < 0.06 else gain,
        chest_gain_mm_mv=5.0 if gain == 10 and rng.random() < 0.1 else None,
        panel_s=float(panel_s),
        left_mm=left_mm,
        top_mm=top_mm + 0.55 * pitch_mm,
        pitch_mm=pitch_mm,
        gap_mm=gap_mm,
        mark=mark,
        mark_tail_mm=float(rng.uniform(0.5, 2.0)),
        separator=str(rng.choice(["none", "none", "ticks", "notch", "dashes", "line"])),
    )


def _letters(rng: np.random.Generator, layout: LayoutSpec) -> LetterSpec:
    """Fonts, and the words at head and foot; the run is printed in one of many spellings."""
    speed, gain = f"{layout.speed_mm_s:g}", f"{layout.gain_mm_mv:g}"
    chest = f"{layout.chest_gain_mm_mv or layout.gain_mm_mv:g}"
    spellings = [
        f"{speed} mm/s   {gain} mm/mV   0.05-150 Hz",
        f"{speed}mm/s {gain}mm/mV",
        f"Speed {speed} mm/sec    Gain {gain} mm/mV",
        f"Speed: {speed} mm/s  Limb: {gain} mm/mV  Chest: {chest} mm/mV",
    ]
    spelling = spellings[3] if layout.chest_gain_mm_mv else str(rng.choice(spellings))
    run = () if rng.random() < 0.2 else (spelling,)
    head: tuple[str, ...] = (
        "Marram Head Infirmary",
        f"Invented patient {rng.integers(1000, 9999)}",
    )
    if rng.random() < 0.5:
        head = ("   ".join(head),)
    at_head = bool(rng.random() < 0.3)
    aside = tuple(rng.permutation(_ASIDES)[: rng.integers(0, 5)].tolist())
    return LetterSpec(
        font=str(rng.choice(FONTS)),
        label_place=str(rng.choice(PLACES)),
        label_mm=float(rng.uniform(2.0, 3.4)),
        colour=_pick(rng, PEN_COLOURS),
        header=head + run if at_head else head,
        footer=() if at_head else run,
        aside=aside,
        header_font=str(rng.choice(FONTS)),
        header_mm=float(rng.uniform(1.8, 3.0)),
    )


def vary_fax(seed: int, lines_per_inch: float) -> CaptureSpec:
    """Return a fax: black and white, coarser down than across, often without its grid."""
    rng = np.random.default_rng([seed, 7])
    return CaptureSpec(
        dpi=(204.0, lines_per_inch),
        tilt_deg=float(rng.uniform(-1.5, 1.5)),
        turn_deg=int(rng.choice([0, 0, 0, 90, 270])),
        blur_mm=float(rng.uniform(0.03, 0.08)),
        noise=float(rng.uniform(1, 6)),
        mode=str(rng.choice(["bilevel", "bilevel", "bilevel", "diffused"])),
        grey_light=int(rng.choice([0, 1, 1])),
        threshold=float(rng.choice([rng.uniform(115, 180), rng.uniform(180, 222)])),
        dpi_tag=str(rng.choice(["right", "right", "right", "absent", "wrong"])),
        dropped_lines=int(rng.choice([0, 0, 6, 15])),
    )


def vary_photo(seed: int) -> CaptureSpec:
    """Return a hand-held photograph of about 8 to 15 megapixels."""
    rng = np.random.default_rng([seed, 8])
    scale = float(rng.uniform(250, 340))
    photo = PhotoSpec(
        yaw_deg=float(rng.uniform(-14, 14)),
        pitch_deg=float(rng.uniform(-14, 14)),
        distance_pages=float(rng.uniform(1.2, 2.2)),
        barrel=float(rng.uniform(-0.03, 0.02)),
        curl_mm=float(rng.choice([0.0, 2.0, 5.0, 9.0])),
        curl_waves=float(rng.uniform(0.4, 1.3)),
        fold_mm=float(rng.choice([0.0, 0.0, 2.5])),
        shade=float(rng.uniform(0.05, 0.5)),
        shadow=float(rng.choice([0.0, 0.3, 0.5])),
        cast=(1.0, float(rng.uniform(0.88, 1.0)), float(rng.uniform(0.72, 1.0))),
        motion_px=float(rng.choice([0.0, 0.0, 2.0, 3.5])),
        finger=bool(rng.random() < 0.2),
        desk=_pick(rng, ((95, 78, 62), (200, 196, 188), (40, 42, 48), (120, 130, 120))),
        margin=float(rng.uniform(0.01, 0.12)),
    )
    return CaptureSpec(
        dpi=(scale, scale),
        tilt_deg=float(rng.uniform(-6, 6)),
        turn_deg=int(rng.choice([0, 0, 0, 90, 180, 270])),
        blur_mm=float(rng.uniform(0.05, 0.13)),
        noise=float(rng.uniform(2, 7)),
        jpeg_quality=int(rng.integers(65, 93)),
        dpi_tag="absent",
        photo=photo,
    )


def vary_wear(seed: int) -> WearSpec:
    """Return the wear of a page that has lived, at least one sort of it."""
    rng = np.random.default_rng([seed, 9])

    def perhaps(chance: float) -> bool:
        return bool(rng.random() < chance)

    return WearSpec(
        fade=float(rng.uniform(0.2, 0.75)) if perhaps(0.6) else 0.0,
        yellow=float(rng.uniform(0.1, 0.7)) if perhaps(0.5) else 0.0,
        stains=int(rng.integers(1, 4)) if perhaps(0.4) else 0,
        folds=int(rng.integers(1, 4)) if perhaps(0.4) else 0,
        holes=int(rng.choice([2, 4])) if perhaps(0.3) else 0,
        stamp=perhaps(0.3),
        bars=int(rng.integers(1, 3)) if perhaps(0.25) else 0,
        writing=int(rng.integers(1, 6)) if perhaps(0.4) else 0,
        speckle=float(rng.uniform(0.02, 0.2)),
        copies=int(rng.integers(1, 3)) if perhaps(0.3) else 0,
    )


def crowd(layout: LayoutSpec, seed: int) -> LayoutSpec:
    """Return the layout with its rows pushed together, so that tall complexes cross."""
    rng = np.random.default_rng([seed, 10])
    pitch_mm = float(rng.uniform(11, 17)) * layout.gain_mm_mv / 10
    middle_mm = layout.top_mm + (layout.rows + len(layout.strips) - 1) * layout.pitch_mm / 2
    pitch_mm = min(pitch_mm, layout.pitch_mm)
    top_mm = middle_mm - (layout.rows + len(layout.strips) - 1) * pitch_mm / 2
    return replace(layout, pitch_mm=pitch_mm, top_mm=top_mm)
