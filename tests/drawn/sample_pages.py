"""The sample pages of the invented Marram Head Infirmary: a table of how each is drawn."""

from dataclasses import dataclass

from tests.drawn.heart import HeartSpec
from tests.drawn.spec import (
    CaptureSpec,
    LayoutSpec,
    LetterSpec,
    PageSpec,
    PaperSpec,
    PenSpec,
    PhotoSpec,
    WearSpec,
)

LETTER_MM = (279.4, 215.9)


@dataclass(frozen=True)
class Sample:
    """One sample page: its file, what it shows in words, and how it is drawn."""

    file: str
    about: str
    heart: HeartSpec
    page: PageSpec


SAMPLES = (
    Sample(
        "normal_3x4_1.jpg",
        "Normal conduction, 3x4 with a strip of II, 300 dpi, red grid",
        HeartSpec("normal", rate_bpm=68, wander_mv=0.02, muscle_mv=0.006, seed=11),
        PageSpec(
            paper=PaperSpec(grid_colour=(238, 158, 150), fine_amount=0.5),
            letters=LetterSpec(
                header=("Marram Head Infirmary", "Invented patient 0417, 58 years"),
                footer=("25 mm/s   10 mm/mV   0.05-150 Hz",),
            ),
            capture=CaptureSpec(noise=0.3, jpeg_quality=42, tilt_deg=0.3),
            seed=11,
        ),
    ),
    Sample(
        "lbbb_early_atrial_3x4_1.jpg",
        "Left bundle branch block, sinus rhythm, two early atrial beats, 3x4 with a strip of II",
        HeartSpec(
            "lbbb",
            rate_bpm=74,
            pr_ms=172,
            early_atrial=(3, 9),
            wander_mv=0.02,
            muscle_mv=0.006,
            turn_deg=-6,
            seed=12,
        ),
        PageSpec(
            paper=PaperSpec(
                offset_mm=(11.0, 9.5),
                colour=(252, 251, 246),
                grid_colour=(150, 196, 160),
                fine_amount=0.6,
                frame_mm=(0.0, 25.0, 275.0, 185.0),
            ),
            pen=PenSpec(0.35, (30, 30, 70)),
            letters=LetterSpec(
                font="serif",
                label_mm=3.0,
                label_place="above",
                colour=(40, 40, 40),
                header=("MARRAM HEAD INFIRMARY", "Cardiac department"),
                footer=("Paper 25 mm/sec    Gain 10 mm/mV    invented patient 2203",),
                header_font="serif bold",
            ),
            layout=LayoutSpec(left_mm=18, top_mm=52, pitch_mm=36, separator="ticks"),
            capture=CaptureSpec(noise=0.3, jpeg_quality=42, tilt_deg=-0.7),
            seed=12,
        ),
    ),
    Sample(
        "rbbb_3x4_3.jpg",
        "Right bundle branch block, 3x4 with strips of V1, II and V5, Letter size",
        HeartSpec("rbbb", rate_bpm=81, pr_ms=150, muscle_mv=0.008, wander_mv=0.015, seed=13),
        PageSpec(
            paper=PaperSpec(
                size_mm=LETTER_MM,
                offset_mm=(4.7, 3.9),
                colour=(255, 255, 255),
                grid_colour=(245, 178, 120),
                fine_mm=0.1,
                coarse_mm=0.3,
            ),
            pen=PenSpec(0.25, (15, 15, 15)),
            letters=LetterSpec(
                font="mono",
                label_mm=2.3,
                label_place="start",
                header=("Marram Head Infirmary        invented patient 0931        F  71 y",),
                footer=("Speed: 25mm/s  Limb: 10mm/mV  Chest: 10mm/mV  F 0.05-100 Hz",),
                header_font="mono",
            ),
            layout=LayoutSpec(
                strips=("V1", "II", "V5"),
                left_mm=8,
                top_mm=35,
                pitch_mm=28.5,
                mark="right",
                mark_tail_mm=1.0,
                separator="notch",
            ),
            capture=CaptureSpec(dpi=(240.0, 240.0), noise=0.4, jpeg_quality=48, tilt_deg=0.4),
            seed=13,
        ),
    ),
    Sample(
        "lafb_6x2.jpg",
        "Left anterior fascicular block, 6x2 without a strip",
        HeartSpec("lafb", rate_bpm=62, pr_ms=168, muscle_mv=0.005, wander_mv=0.02, seed=14),
        PageSpec(
            paper=PaperSpec(
                grid="dots",
                colour=(250, 252, 255),
                grid_colour=(120, 150, 205),
                fine_mm=0.3,
                coarse_mm=0.18,
                coarse_amount=0.7,
                fine_amount=0.9,
            ),
            pen=PenSpec(0.3, (20, 20, 20)),
            letters=LetterSpec(
                font="bold",
                label_place="left",
                label_mm=2.8,
                header=("Invented patient 1178", "Marram Head Infirmary, ward 4"),
                footer=("25 mm/s  10 mm/mV",),
            ),
            layout=LayoutSpec(
                rows=6,
                columns=2,
                strips=(),
                panel_s=4.8,
                left_mm=25,
                top_mm=38,
                pitch_mm=26,
                gap_mm=10,
            ),
            capture=CaptureSpec(dpi=(200.0, 200.0), noise=0.5, jpeg_quality=58, tilt_deg=0.9),
            seed=14,
        ),
    ),
    Sample(
        "normal_12x1_50mm.jpg",
        "Normal conduction, 12x1 at 50 mm/s",
        HeartSpec(
            "normal", rate_bpm=88, pr_ms=142, muscle_mv=0.006, turn_deg=12, seed=15, size=0.8
        ),
        PageSpec(
            paper=PaperSpec(
                offset_mm=(6.0, 5.5),
                colour=(255, 253, 250),
                grid_colour=(225, 130, 165),
                fine_amount=0.4,
                coarse_amount=0.85,
            ),
            pen=PenSpec(0.28, (25, 25, 25)),
            letters=LetterSpec(
                font="stroke",
                label_place="left",
                label_mm=2.4,
                header_font="stroke",
                header=("MARRAM HEAD INFIRMARY   INVENTED PATIENT 3310",),
                footer=("50 mm/s  10 mm/mV  0.05-150Hz",),
            ),
            layout=LayoutSpec(
                rows=12,
                columns=1,
                strips=(),
                speed_mm_s=50,
                panel_s=5.0,
                left_mm=28,
                top_mm=24,
                pitch_mm=14.5,
            ),
            capture=CaptureSpec(dpi=(200.0, 200.0), noise=0.5, jpeg_quality=60, tilt_deg=-0.4),
            seed=15,
        ),
    ),
    Sample(
        "half_gain_chest_3x4.png",
        "Normal conduction with tall chest leads at half gain: limb 10, chest 5 mm/mV; grey scan",
        HeartSpec("normal", rate_bpm=58, size=1.7, muscle_mv=0.006, wander_mv=0.02, seed=16),
        PageSpec(
            paper=PaperSpec(
                size_mm=LETTER_MM,
                offset_mm=(10.2, 8.8),
                grid_colour=(190, 190, 190),
                colour=(252, 252, 252),
                fine_amount=0.6,
            ),
            letters=LetterSpec(
                font="times bold",
                label_mm=3.2,
                header_font="times",
                header_mm=3.0,
                header=("Marram Head Infirmary", "Invented patient 5024"),
                footer=("25 mm/s     Limb leads 10 mm/mV     Chest leads 5 mm/mV",),
            ),
            layout=LayoutSpec(
                strips=(),
                chest_gain_mm_mv=5.0,
                left_mm=14,
                top_mm=60,
                pitch_mm=45,
                mark="both",
                separator="dashes",
                gap_mm=0.0,
                panel_s=2.35,
            ),
            capture=CaptureSpec(dpi=(150.0, 150.0), noise=0.0, mode="grey", tilt_deg=0.2),
            seed=16,
        ),
    ),
    Sample(
        "tilted_copy_lbbb_3x4_1.jpg",
        "Left bundle branch block, a grey photocopy laid on the glass at 3 degrees",
        HeartSpec(
            "lbbb", rate_bpm=66, pr_ms=184, qrs_ms=164, muscle_mv=0.006, wander_mv=0.03, seed=17
        ),
        PageSpec(
            paper=PaperSpec(grid_colour=(232, 140, 140), fine_amount=0.6, offset_mm=(7.5, 8.0)),
            pen=PenSpec(0.4, (30, 30, 30)),
            letters=LetterSpec(
                font="oblique",
                label_place="below",
                header_mm=2.2,
                header=("Marram Head Infirmary   invented patient 7781   25 mm/s 10 mm/mV",),
            ),
            layout=LayoutSpec(strips=("V1",), left_mm=22, top_mm=50, pitch_mm=37),
            capture=CaptureSpec(
                dpi=(200.0, 200.0), noise=3.0, mode="grey", jpeg_quality=55, tilt_deg=3.0
            ),
            wear=WearSpec(copies=1, speckle=0.05),
            seed=17,
        ),
    ),
    Sample(
        "fax_normal_3x4_1.tif",
        "Normal conduction, a 1-bit fax at 204x196 (pixels are not square)",
        HeartSpec("normal", rate_bpm=76, pr_ms=156, muscle_mv=0.004, size=1.2, seed=18),
        PageSpec(
            paper=PaperSpec(grid_colour=(235, 120, 120), colour=(255, 255, 255), fine_amount=0.35),
            pen=PenSpec(0.35, (10, 10, 10)),
            letters=LetterSpec(
                font="bold",
                label_mm=3.0,
                header_mm=3.0,
                header=("MARRAM HEAD INFIRMARY   INVENTED PATIENT 6402", "25 mm/s   10 mm/mV"),
            ),
            layout=LayoutSpec(left_mm=20, top_mm=52),
            capture=CaptureSpec(
                dpi=(204.0, 196.0), noise=2.0, mode="bilevel", threshold=165, tilt_deg=0.6
            ),
            wear=WearSpec(speckle=0.04),
            seed=18,
        ),
    ),
    Sample(
        "photo_fibrillation_3x4_1.jpg",
        "Atrial fibrillation, normal conduction, photographed askew on a desk, half in shadow",
        HeartSpec(rhythm="fibrillation", rate_bpm=92, muscle_mv=0.006, seed=19),
        PageSpec(
            paper=PaperSpec(
                size_mm=LETTER_MM,
                offset_mm=(9.2, 7.7),
                colour=(255, 252, 248),
                grid_colour=(236, 130, 150),
                fine_amount=0.7,
            ),
            pen=PenSpec(0.35, (35, 30, 40)),
            letters=LetterSpec(
                font="serif bold",
                label_mm=2.7,
                label_place="below",
                header=("Marram Head Infirmary, emergency room", "Invented patient 8810"),
                footer=("25 mm/s    10 mm/mV",),
            ),
            layout=LayoutSpec(panel_s=2.35, left_mm=17, top_mm=46, pitch_mm=38, separator="ticks"),
            capture=CaptureSpec(
                dpi=(190.0, 190.0),
                noise=2.0,
                jpeg_quality=62,
                tilt_deg=-2.0,
                blur_mm=0.08,
                dpi_tag="absent",
                photo=PhotoSpec(yaw_deg=7, pitch_deg=-9, shadow=0.35, curl_mm=3),
            ),
            seed=19,
        ),
    ),
)
