"""Files of every kind become the same pixels; what cannot be read is refused in words."""

import contextlib
import hashlib
import io
import os

import numpy as np
import pytest
from PIL import Image, TiffImagePlugin

from digitize.errors import InputError, UnreadableFile
from digitize.pages import Page, open_pages
from tests.digitize import made_files as made

PAPER = made.paper()


def only(path, **options) -> Page:
    pages = list(open_pages(path, **options))
    assert len(pages) == 1
    return pages[0]


def save(path, pixels=PAPER, **options):
    Image.fromarray(pixels).save(path, **options)
    return path


def refused(path, **options) -> str:
    with pytest.raises(UnreadableFile) as caught:
        list(open_pages(path, **options))
    text = str(caught.value)
    assert text.startswith(path.name) or not path.name.isprintable()
    assert "\n" not in text
    return text


# ---- pixels ----------------------------------------------------------------------------------


@pytest.mark.parametrize("kind", ["png", "tiff", "bmp", "webp"])
def test_lossless_colour_comes_back_exactly(tmp_path, kind):
    page = only(save(tmp_path / f"scan.{kind}", **({"lossless": True} if kind == "webp" else {})))
    np.testing.assert_array_equal(page.pixels, PAPER)
    assert not page.bilevel


def test_jpeg_comes_back_within_its_own_loss(tmp_path):
    page = only(save(tmp_path / "scan.jpg", quality=95, subsampling=0))
    assert np.abs(page.pixels.astype(int) - PAPER).mean() < 3


def test_source_says_which_page_of_which_file(tmp_path):
    path = save(tmp_path / "scan.png", dpi=(300, 300))
    source = only(path).source
    assert source.sha256 == hashlib.sha256(path.read_bytes()).hexdigest()
    assert (source.file_name, source.page) == ("scan.png", 1)
    assert (source.width_px, source.height_px) == (50, 30)
    assert source.dpi == pytest.approx((300, 300), abs=0.02)  # PNG stores whole pixels per metre


def test_name_may_lie_about_the_kind(tmp_path):
    png = save(tmp_path / "scan.png")
    np.testing.assert_array_equal(only(png.rename(tmp_path / "scan.pdf")).pixels, PAPER)


def test_grey_stored_as_colour_becomes_grey(tmp_path):
    grey = PAPER[..., 0]
    page = only(save(tmp_path / "grey.png", np.dstack([grey] * 3)))
    np.testing.assert_array_equal(page.pixels, grey)


@pytest.mark.parametrize("order", ["<", ">"])
def test_sixteen_bits_keep_their_upper_eight(tmp_path, order):
    ramp = np.linspace(0, 65535, 30 * 50).reshape(30, 50).astype(f"{order}u2")
    path = tmp_path / "deep.tiff"
    Image.fromarray(ramp).save(path)
    np.testing.assert_array_equal(only(path).pixels, (ramp >> 8).astype(np.uint8))


def test_sixteen_bit_png(tmp_path):
    ramp = np.linspace(0, 65535, 30 * 50).reshape(30, 50).astype(np.uint16)
    path = tmp_path / "deep.png"
    Image.fromarray(ramp).save(path)
    np.testing.assert_array_equal(only(path).pixels, (ramp >> 8).astype(np.uint8))


def test_floating_point_pixels_are_refused(tmp_path):
    path = save(tmp_path / "float.tiff", np.zeros((5, 7), np.float32))
    assert "8-bit PNG" in refused(path)


def test_cmyk_is_read_as_colours_of_light(tmp_path):
    path = tmp_path / "print.tiff"
    Image.new("CMYK", (7, 5), (0, 255, 255, 0)).save(path)
    np.testing.assert_array_equal(only(path).pixels, np.full((5, 7, 3), (255, 0, 0)))


def test_palette_and_transparency_come_out_on_white(tmp_path):
    image = Image.new("P", (7, 5), 1)
    image.putpalette([0, 0, 0, 10, 90, 200])
    image.putpixel((2, 3), 0)
    image.save(tmp_path / "palette.png")
    image.save(tmp_path / "clear.png", transparency=0)
    assert tuple(only(tmp_path / "palette.png").pixels[3, 2]) == (0, 0, 0)
    assert tuple(only(tmp_path / "clear.png").pixels[3, 2]) == (255, 255, 255)
    assert tuple(only(tmp_path / "clear.png").pixels[0, 0]) == (10, 90, 200)


def test_half_transparent_black_is_mid_grey(tmp_path):
    path = tmp_path / "alpha.png"
    Image.new("RGBA", (7, 5), (0, 0, 0, 128)).save(path)
    assert abs(int(only(path).pixels[0, 0]) - 127) <= 1


def test_of_an_animation_the_first_frame_is_the_page(tmp_path):
    frames = [Image.new("L", (7, 5), level) for level in (200, 30)]
    frames[0].save(tmp_path / "moving.gif", save_all=True, append_images=frames[1:])
    assert int(only(tmp_path / "moving.gif").pixels[0, 0]) == 200


# ---- faxes -----------------------------------------------------------------------------------


def fax(path, dpi, pixels=None):
    pixels = PAPER[..., 0] > 100 if pixels is None else pixels
    Image.fromarray(pixels).save(path, compression="group4", dpi=dpi)
    return path


def test_fax_keeps_its_two_resolutions_and_is_bilevel(tmp_path):
    page = only(fax(tmp_path / "fax.tiff", (204, 98)))
    assert page.source.dpi == (204, 98)
    assert page.bilevel
    np.testing.assert_array_equal(page.pixels, np.where(PAPER[..., 0] > 100, 255, 0))


def test_bilevel_is_seen_in_whatever_file(tmp_path):
    assert only(save(tmp_path / "fax.png", ((PAPER[..., 0] > 100) * 255).astype(np.uint8))).bilevel


# ---- resolution ------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("dpi", "kept"),
    [((300, 300), True), ((50, 50), True), ((49, 49), False), ((2400, 2400), True),
     ((2401, 300), False), ((0, 0), False)],
)  # fmt: skip
def test_absurd_resolution_is_no_resolution(tmp_path, dpi, kept):
    page = only(save(tmp_path / "scan.tiff", dpi=dpi))
    assert (page.source.dpi == dpi) if kept else (page.source.dpi is None)


def test_resolution_that_makes_paper_broader_than_any_chart_is_dropped(tmp_path):
    # 1800 px at 72 dpi are 635 mm; ISO A2 is 420 mm on its short side.
    path = save(tmp_path / "photo.jpg", np.zeros((1800, 2000), np.uint8), dpi=(72, 72))
    assert only(path).source.dpi is None
    path = save(tmp_path / "screen.jpg", np.zeros((600, 2000), np.uint8), dpi=(72, 72))
    assert only(path).source.dpi == (72, 72)


def test_absent_resolution_is_none(tmp_path):
    assert only(save(tmp_path / "scan.png")).source.dpi is None


@pytest.mark.parametrize("kind", ["jpg", "png", "tiff"])
@pytest.mark.parametrize(
    ("orientation", "turn"),  # Exif 2.32, tag 274: 3 half a turn, 6 and 8 a quarter turn
    [(1, 0), (3, 2), (6, -1), (8, 1)],
)
def test_orientation_tag_turns_pixels_and_resolution(tmp_path, kind, orientation, turn):
    exif = Image.Exif()
    exif[274] = orientation
    path = save(tmp_path / f"photo.{kind}", exif=exif, dpi=(200, 100))
    page = only(path)
    upright = np.rot90(PAPER, turn)
    assert page.pixels.shape == upright.shape
    assert np.abs(page.pixels.astype(int) - upright).mean() < 12  # JPEG at its default quality
    dpi = (200, 100) if orientation in (1, 3) else (100, 200)
    assert page.source.dpi == pytest.approx(dpi, abs=0.02)


# ---- several pages ---------------------------------------------------------------------------


def test_tiff_pages_are_numbered_and_thumbnails_left_out(tmp_path):
    path = tmp_path / "many.tiff"
    with TiffImagePlugin.AppendingTiffWriter(path, True) as file:
        for level, kind in ((10, 0), (20, 1), (30, 0)):
            tags = TiffImagePlugin.ImageFileDirectory_v2()
            tags[254] = kind
            Image.new("L", (7, 5), level).save(file, format="TIFF", tiffinfo=tags)
            file.newFrame()
    pages = list(open_pages(path))
    assert [(p.source.page, int(p.pixels[0, 0])) for p in pages] == [(1, 10), (2, 30)]


def test_one_bad_page_does_not_stop_the_others(tmp_path):
    path = tmp_path / "many.tiff"
    sizes = [(7, 5), (70, 50), (7, 5)]
    images = [Image.new("L", size, 90) for size in sizes]
    images[0].save(path, save_all=True, append_images=images[1:])
    errors: list[InputError] = []
    pages = list(open_pages(path, max_megapixels=0.001, on_error=errors.append))
    assert [p.source.page for p in pages] == [1, 3]
    assert str(errors[0]).startswith("many.tiff, page 2: 70 x 50 pixels are")
    assert "page 2" in refused(path, max_megapixels=0.001)


# ---- PDF -------------------------------------------------------------------------------------


@pytest.mark.parametrize("rotate_deg", [0, 90, 180, 270])
def test_pdf_of_one_image_gives_that_image_exactly(tmp_path, rotate_deg):
    # 50 x 30 px on 24 x 7.2 pt: 150 dpi across and 300 down, as a fax would have.
    content = made.image_pdf(PAPER, page_pt=(26, 9), place=b"24 0 0 7.2 1 1", rotate_deg=rotate_deg)
    page = only(made.write(tmp_path / "scan.pdf", content))
    np.testing.assert_array_equal(page.pixels, np.rot90(PAPER, -rotate_deg // 90))
    dpi = (150, 300) if rotate_deg % 180 == 0 else (300, 150)
    assert page.source.dpi == pytest.approx(dpi, rel=1e-4)


def test_pdf_with_an_invisible_text_layer_is_still_its_image(tmp_path):
    layer = b"BT /F 6 Tf 3 Tr 2 2 Td (words) Tj ET"
    content = made.image_pdf(PAPER, page_pt=(50, 30), place=b"50 0 0 30 0 0", extra=layer)
    np.testing.assert_array_equal(only(made.write(tmp_path / "scan.pdf", content)).pixels, PAPER)


@pytest.mark.parametrize(
    ("place", "extra"),
    [
        (b"50 0 0 30 0 0", b"BT /F 9 Tf 2 2 Td (words) Tj ET"),  # printing over it
        (b"50 0 0 30 0 0", b"0 0 m 50 30 l S"),  # a path over it
        (b"20 0 0 12 0 0", b""),  # a small picture on a larger page
        (b"-50 0 0 30 50 0", b""),  # mirrored
        (b"60 0 0 36 -5 -3", b""),  # cropped by the page
    ],
)
def test_pdf_that_is_more_than_its_image_is_rendered(tmp_path, place, extra):
    content = made.image_pdf(PAPER, page_pt=(50, 30), place=place, extra=extra)
    page = only(made.write(tmp_path / "page.pdf", content))
    assert page.source.dpi == (300, 300)
    assert page.pixels.shape[:2] == (126, 209)  # 30 and 50 pt at 300 dpi, rounded up


def test_pdf_drawn_by_paths_is_rendered_on_white(tmp_path):
    content = made.pdf(
        b"<</Type/Catalog /Pages 2 0 R>>",
        b"<</Type/Pages /Kids[3 0 R] /Count 1>>",
        b"<</Type/Page /Parent 2 0 R /MediaBox[0 0 72 36] /Contents 4 0 R>>",
        made.stream(b"", b"0 18 36 18 re f"),
    )
    page = only(made.write(tmp_path / "vector.pdf", content))
    assert page.pixels.shape == (150, 300)
    assert page.pixels[70, 140] == 0  # the rectangle fills the upper left quarter
    assert page.pixels[80, 140] == page.pixels[70, 160] == 255


def test_pdf_image_is_refused_by_its_stated_size(tmp_path):
    content = made.image_pdf(
        PAPER, page_pt=(50, 30), place=b"50 0 0 30 0 0", declared_px=(40_000, 40_000)
    )
    assert "1600 megapixels" in refused(made.write(tmp_path / "bomb.pdf", content))


# ---- HEIC and DICOM --------------------------------------------------------------------------


def test_heic_photo(tmp_path):
    heif = pytest.importorskip("pillow_heif", reason="the extra heic is not installed")
    pixels = made.paper(300, 500)
    heif.from_pillow(Image.fromarray(pixels)).save(tmp_path / "photo.heic", quality=90)
    page = only(tmp_path / "photo.heic")
    assert np.abs(page.pixels.astype(int) - pixels).mean() < 4
    assert "megapixels" in refused(tmp_path / "photo.heic", max_megapixels=0.1)


def test_heic_without_its_package_names_the_extra(tmp_path, monkeypatch):
    monkeypatch.setitem(__import__("sys").modules, "pillow_heif", None)
    path = made.write(tmp_path / "photo.heic", b"\0\0\0\x18ftypheic" + bytes(40))
    assert "millivellum[heic]" in refused(path)


def secondary_capture(path, pixels, photometric, **elements):
    pydicom = pytest.importorskip("pydicom", reason="the extra dicom is not installed")
    dataset = pydicom.Dataset()
    dataset.SOPClassUID = pydicom.uid.SecondaryCaptureImageStorage
    dataset.SOPInstanceUID = "1.2.826.0.1.3680043.8.498.1"
    dataset.file_meta = pydicom.dataset.FileMetaDataset()
    dataset.file_meta.TransferSyntaxUID = pydicom.uid.ExplicitVRLittleEndian
    if pixels is not None:
        dataset.set_pixel_data(pixels, photometric, 8)
    for name, value in elements.items():
        setattr(dataset, name, value)
    dataset.save_as(path, enforce_file_format=True)
    return path


def test_dicom_secondary_capture(tmp_path):
    path = secondary_capture(
        tmp_path / "scan.dcm", PAPER, "RGB", NominalScannedPixelSpacing=[0.2, 0.1]
    )
    page = only(path)
    np.testing.assert_array_equal(page.pixels, PAPER)
    # PS3.3 10.7.1.3: spacing is given between rows first, that is down.
    assert page.source.dpi == pytest.approx((254, 127))


def test_dicom_with_white_as_zero_is_turned_round(tmp_path):
    grey = PAPER[..., 0]
    path = secondary_capture(tmp_path / "scan.dcm", grey, "MONOCHROME1")
    np.testing.assert_array_equal(only(path).pixels, 255 - grey)


def test_dicom_without_a_picture_points_to_measure(tmp_path):
    path = secondary_capture(tmp_path / "ecg.dcm", None, "")
    assert "measure" in refused(path)


# ---- what cannot be read ---------------------------------------------------------------------


def png_bytes() -> bytes:
    buffer = io.BytesIO()
    Image.fromarray(made.paper(300, 500)).save(buffer, "PNG")
    return buffer.getvalue()


BAD = [
    ("empty.png", b"", "the file is empty"),
    ("words.png", b"not a picture at all\n" * 50, "no picture or document of a known kind"),
    ("zeros.tiff", bytes(4000), "no picture or document of a known kind"),
    ("cut.png", png_bytes()[:9000], "damaged or incomplete"),
    ("head.png", png_bytes()[:20], "damaged or incomplete"),
    ("bomb.png", made.bomb_png(), "--max-megapixels|far too large"),
    ("large.png", made.bomb_png(12_000, 12_000), "144 megapixels, the limit is 120"),
    ("locked.pdf", made.locked_pdf(), "locked with a password"),
    ("none.pdf", made.empty_pdf(), "the PDF is damaged or has no page"),
    ("cut.pdf", made.empty_pdf()[:40], "the PDF is damaged"),
    ("cut.dcm", bytes(128) + b"DICM\x08\0", "DICOM"),
    ("cut.heic", b"\0\0\0\x18ftypheic" + bytes(40), "damaged or incomplete"),
]


@pytest.mark.parametrize(("name", "content", "said"), BAD, ids=[name for name, _, _ in BAD])
def test_bad_file_is_refused_in_one_line(tmp_path, name, content, said):
    text = refused(made.write(tmp_path / name, content))
    assert any(part in text for part in said.split("|"))


def test_limit_can_be_raised(tmp_path):
    path = save(tmp_path / "scan.png", np.zeros((300, 400), np.uint8))
    assert "0.12 megapixels" not in refused(path, max_megapixels=0.1)
    assert only(path, max_megapixels=0.12).source.width_px == 400


def test_missing_folder_and_unreadable(tmp_path):
    assert "no such file" in refused(tmp_path / "nothing.png")
    assert "this is a folder" in refused(tmp_path)
    os.mkfifo(tmp_path / "pipe.png")
    assert "not a regular file" in refused(tmp_path / "pipe.png")


@pytest.mark.skipif(os.geteuid() == 0, reason="root may read every file")
def test_file_without_permission(tmp_path):
    path = save(tmp_path / "closed.png")
    path.chmod(0)
    assert "permissions" in refused(path)


def test_name_with_a_newline_stays_on_one_line(tmp_path):
    path = made.write(tmp_path / "two\nlines.png", b"")
    assert refused(path).startswith("two\\nlines.png: ")


def test_decoders_do_not_chatter(tmp_path, capfd):
    buffer = io.BytesIO()
    Image.fromarray(made.paper()).save(buffer, "TIFF", compression="tiff_deflate")
    content = bytearray(buffer.getvalue())
    content[9:40] = bytes(31)  # within the compressed strip
    refused(made.write(tmp_path / "broken.tiff", bytes(content)))
    assert capfd.readouterr().err == ""


@pytest.mark.parametrize("kind", ["PNG", "JPEG", "TIFF", "GIF", "BMP", "WEBP", "PDF"])
def test_files_cut_anywhere_are_read_or_refused(tmp_path, kind):
    buffer = io.BytesIO()
    Image.fromarray(made.paper(120, 200)).save(buffer, kind)
    whole = buffer.getvalue()
    for tenth in range(10):
        path = made.write(tmp_path / f"{tenth}", whole[: len(whole) * tenth // 10])
        with contextlib.suppress(UnreadableFile):
            list(open_pages(path))


@pytest.mark.parametrize("kind", ["PNG", "JPEG", "TIFF", "GIF", "BMP", "WEBP", "PDF"])
def test_files_with_flipped_bits_are_read_or_refused(tmp_path, kind):
    rng = np.random.default_rng(7)
    buffer = io.BytesIO()
    image = Image.fromarray(made.paper(40, 70))
    image.save(buffer, kind, **({"compression": "tiff_lzw"} if kind == "TIFF" else {}))
    for variant in range(60):
        content = np.frombuffer(buffer.getvalue(), np.uint8).copy()
        where = rng.integers(0, min(len(content), 600 if variant % 2 else len(content)), 4)
        content[where] ^= rng.integers(1, 256, 4).astype(np.uint8)
        path = made.write(tmp_path / f"{variant}", content.tobytes())
        with contextlib.suppress(UnreadableFile):
            list(open_pages(path, max_megapixels=1))
