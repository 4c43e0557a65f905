"""More sample pages: what faxing, wear and a program that never had pixels make of them."""

from tests.drawn.heart import HeartSpec
from tests.drawn.sample_pages import SAMPLES, Sample
from tests.drawn.spec import (
    CaptureSpec,
    LayoutSpec,
    LetterSpec,
    PageSpec,
    PaperSpec,
    PenSpec,
    WearSpec,
)

HARD = (
    Sample(
        "fax_coarse_rbbb_3x4_1.tif",
        "Right bundle branch block, a 1-bit fax at 204x98 on which no grid is left",
        HeartSpec("rbbb", rate_bpm=72, pr_ms=164, muscle_mv=0.004, size=1.1, seed=21),
        PageSpec(
            paper=PaperSpec(grid_colour=(245, 190, 190), colour=(255, 255, 255), fine_amount=0.3),
            pen=PenSpec(0.4, (10, 10, 10)),
            letters=LetterSpec(
                font="bold",
                label_mm=3.4,
                header_mm=3.4,
                header_font="bold",
                header=("MARRAM HEAD INFIRMARY   INVENTED PATIENT 3128", "25 mm/s   10 mm/mV"),
            ),
            layout=LayoutSpec(left_mm=22, top_mm=54),
            capture=CaptureSpec(
                dpi=(204.0, 98.0), noise=2.0, mode="bilevel", threshold=150, tilt_deg=0.3
            ),
            seed=21,
        ),
    ),
    Sample(
        "worn_lbbb_3x4_1.jpg",
        "Left bundle branch block, faded and yellowed, with a fold, a stain, a stamp and writing",
        HeartSpec("lbbb", rate_bpm=70, pr_ms=178, muscle_mv=0.006, wander_mv=0.02, seed=22),
        PageSpec(
            paper=PaperSpec(grid_colour=(236, 150, 140), fine_amount=0.6, offset_mm=(9.0, 7.5)),
            pen=PenSpec(0.35, (45, 40, 45)),
            letters=LetterSpec(
                font="sans",
                label_mm=2.8,
                header=("Marram Head Infirmary", "Invented patient 4471"),
                footer=("25 mm/s   10 mm/mV",),
            ),
            layout=LayoutSpec(left_mm=20, top_mm=52, separator="ticks"),
            capture=CaptureSpec(dpi=(200.0, 200.0), noise=1.0, jpeg_quality=50, tilt_deg=0.8),
            wear=WearSpec(
                fade=0.35,
                yellow=0.4,
                stains=1,
                folds=1,
                holes=2,
                stamp=True,
                writing=2,
                speckle=0.03,
            ),
            seed=22,
        ),
    ),
    Sample(
        "vector_normal_6x2.pdf",
        "Normal conduction, 6x2, a PDF whose traces are drawn as lines",
        HeartSpec("normal", rate_bpm=64, pr_ms=150, muscle_mv=0.006, wander_mv=0.02, seed=23),
        PageSpec(
            paper=PaperSpec(grid_colour=(240, 160, 150), colour=(255, 255, 255)),
            letters=LetterSpec(
                font="sans",
                header=("Marram Head Infirmary", "Invented patient 5290"),
                footer=("25 mm/s   10 mm/mV",),
            ),
            layout=LayoutSpec(
                rows=6, columns=2, strips=(), panel_s=5.0, left_mm=22, top_mm=34, pitch_mm=27
            ),
            seed=23,
        ),
    ),
)
ALL_SAMPLES = (*SAMPLES, *HARD)
