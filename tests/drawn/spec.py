"""Everything that decides how a drawn page looks, as frozen records.

Lengths are millimetres of paper. The millimetre frame of a page is that of its grid: 1 mm lines
at whole numbers, 5 mm lines at multiples of five, x to the right, y downward.
"""

from dataclasses import dataclass, field

Colour = tuple[int, int, int]  # sRGB


@dataclass(frozen=True)
class PaperSpec:
    """The sheet and its ruling."""

    size_mm: tuple[float, float] = (297.0, 210.0)
    offset_mm: tuple[float, float] = (8.5, 7.0)  # from the sheet's corner to grid line (0, 0)
    grid: str = "lines"  # "lines", "dots", "dotted", "coarse", "none"
    colour: Colour = (255, 250, 246)
    grid_colour: Colour = (240, 150, 140)
    fine_mm: float = 0.12
    coarse_mm: float = 0.25
    fine_amount: float = 0.55  # 1: the full grid colour in the middle of a line
    coarse_amount: float = 1.0
    frame_mm: tuple[float, float, float, float] | None = None  # ruled area; None: all over


@dataclass(frozen=True)
class PenSpec:
    """The pen, or what stands for one in a thermal or laser recorder."""

    width_mm: float = 0.3
    colour: Colour = (25, 25, 30)
    uneven: float = 0.0  # relative slow variation of the ink along the stroke


@dataclass(frozen=True)
class LetterSpec:
    """Words on the page. Fonts: see `lettering.FONTS`."""

    font: str = "sans"
    label_place: str = "above"  # "above", "below", "left", "start", "none"
    label_mm: float = 2.6  # height of a capital
    colour: Colour = (25, 25, 30)
    header: tuple[str, ...] = ()
    footer: tuple[str, ...] = ()
    aside: tuple[str, ...] = ()  # at the head, right of the middle
    header_font: str = "sans"
    header_mm: float = 2.4


@dataclass(frozen=True)
class LayoutSpec:
    """Which leads stand where, at what scale."""

    rows: int = 3
    columns: int = 4
    strips: tuple[str, ...] = ("II",)
    order: str = "usual"  # "usual", "cabrera", "limb", "chest"
    timing: str = "consecutive"  # or "simultaneous"
    speed_mm_s: float = 25.0
    gain_mm_mv: float = 10.0
    chest_gain_mm_mv: float | None = None  # None: like the limb leads
    panel_s: float = 2.5
    left_mm: float = 20.0
    top_mm: float = 45.0  # zero line of the first row
    pitch_mm: float = 35.0  # from row to row
    gap_mm: float = 0.0  # between columns; time runs on through it
    mark: str = "left"  # "left", "right", "both", "middle", "none"
    mark_tail_mm: float = 1.5  # zero line on either side of the calibration pulse
    separator: str = "none"  # "none", "ticks", "dashes", "line", "notch"

    @property
    def name(self) -> str:
        """Conventional name such as "3x4+1"."""
        strips = f"+{len(self.strips)}" if self.strips and self.rows * self.columns > 1 else ""
        return f"{self.rows}x{self.columns}{strips}"


@dataclass(frozen=True)
class PhotoSpec:
    """A camera held over the page, in place of a scanner."""

    yaw_deg: float = 6.0
    pitch_deg: float = -8.0
    distance_pages: float = 1.6  # camera distance over page width
    barrel: float = -0.02  # radial distortion at the corner of the picture
    curl_mm: float = 4.0  # height of the paper's wave
    curl_waves: float = 0.7  # waves over the page
    fold_mm: float = 0.0  # height of a middle fold
    shade: float = 0.3  # loss of light towards one side
    corners: float = 0.12  # loss of light in the corners
    shadow: float = 0.0  # depth of a hard shadow
    cast: tuple[float, float, float] = (1.0, 0.96, 0.88)
    motion_px: float = 0.0
    finger: bool = False  # a fingertip over one edge of the page
    desk: Colour = (95, 78, 62)
    margin: float = 0.06  # desk around the page, of the page's width


@dataclass(frozen=True)
class WearSpec:
    """What years and hands have done to the page."""

    fade: float = 0.0  # share of the trace ink that is gone, in patches
    yellow: float = 0.0
    stains: int = 0
    folds: int = 0
    holes: int = 0
    stamp: bool = False
    bars: int = 0  # black redaction bars
    writing: int = 0  # strokes of handwriting
    speckle: float = 0.0  # specks per square centimetre
    copies: int = 0  # times it went through a photocopier


@dataclass(frozen=True)
class CaptureSpec:
    """How the paper became pixels."""

    dpi: tuple[float, float] = (300.0, 300.0)  # across, down
    tilt_deg: float = 0.0
    turn_deg: int = 0  # clockwise: 0, 90, 180, 270
    blur_mm: float = 0.04
    noise: float = 1.5  # grey levels
    mode: str = "colour"  # "colour", "grey", "bilevel", "diffused"
    grey_light: int = 1  # light in which a grey scanner sees: 0 red, 1 green, 2 blue
    threshold: float = 128.0  # code value that divides black from white
    jpeg_quality: int | None = None
    dpi_tag: str = "right"  # "right", "absent", "wrong"
    photo: PhotoSpec | None = None
    dropped_lines: int = 0  # lines lost on a fax


@dataclass(frozen=True)
class PageSpec:
    """One page: with the recording it holds, it decides every pixel."""

    paper: PaperSpec = field(default_factory=PaperSpec)
    pen: PenSpec = field(default_factory=PenSpec)
    letters: LetterSpec = field(default_factory=LetterSpec)
    layout: LayoutSpec = field(default_factory=LayoutSpec)
    wear: WearSpec = field(default_factory=WearSpec)
    capture: CaptureSpec = field(default_factory=CaptureSpec)
    seed: int = 0
