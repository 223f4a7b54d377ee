"""Decoding: every kind of scan gives the same page, and every bad file a clear error."""

import hashlib
import io
import struct
import zlib

import numpy as np
import pypdfium2
import pytest
from PIL import Image

from curvebank.errors import SheetError
from curvebank.sheet import Limits, load


def file_of(picture, kind, **options):
    buffer = io.BytesIO()
    picture.save(buffer, kind, **options)
    return buffer.getvalue()


def page_picture(width=60, height=40):
    grey = np.full((height, width), 250, np.uint8)
    grey[10:12, 5:50] = 10
    grey[5:35, 8:10] = 120
    return Image.fromarray(grey)


def pdf_bytes(pages=2):
    document = pypdfium2.PdfDocument.new()
    for k in range(pages):
        document.new_page(72 * (k + 1), 144)
    buffer = io.BytesIO()
    document.save(buffer)
    document.close()
    return buffer.getvalue()


@pytest.mark.parametrize("kind", ["PNG", "TIFF", "BMP"])
def test_lossless_kinds_keep_every_pixel(kind):
    data = file_of(page_picture(), kind)
    sheet = load(data)
    assert np.array_equal(sheet.pixels, np.asarray(page_picture()))
    assert sheet.info.sha256 == hashlib.sha256(data).hexdigest()
    assert (sheet.info.width, sheet.info.height, sheet.info.pages) == (60, 40, 1)
    assert not sheet.pixels.flags.writeable


def test_resolution_is_read_and_turned_with_the_page():
    data = file_of(page_picture(), "PNG", dpi=(200, 100))
    assert load(data).info.dpi_x == pytest.approx(200, abs=0.1)
    turned = load(data, turn=90).info
    assert (turned.width, turned.height, turned.turn) == (40, 60, 90)
    assert turned.dpi_x == pytest.approx(100, abs=0.1)


def test_turn_is_clockwise():
    grey = np.full((20, 30), 255, np.uint8)
    grey[0, 0] = 0  # top left goes to top right
    pixels = load(file_of(Image.fromarray(grey), "PNG"), turn=90).pixels
    assert pixels.shape == (30, 20) and pixels[0, 19] == 0
    assert load(file_of(Image.fromarray(grey), "PNG"), turn=180).pixels[19, 29] == 0
    assert load(file_of(Image.fromarray(grey), "PNG"), turn=270).pixels[29, 0] == 0


def test_exif_turn_is_applied_to_jpeg():
    exif = Image.Exif()
    exif[0x0112] = 6  # the camera was held so that the page must turn clockwise
    sheet = load(file_of(page_picture(64, 48), "JPEG", exif=exif, quality=95))
    assert (sheet.info.width, sheet.info.height) == (48, 64)
    assert sheet.pixels[5:50, 36:38].mean() < 60  # the horizontal stroke now runs down


def test_one_bit_group_four_and_pages_of_a_tiff():
    first = page_picture().convert("1")
    second = Image.new("1", (33, 44), 1)
    data = file_of(first, "TIFF", compression="group4", save_all=True, append_images=[second])
    sheet = load(data)
    assert set(np.unique(sheet.pixels)) == {0, 255} and sheet.info.pages == 2
    other = load(data, page=2)
    assert (other.info.width, other.info.height, other.info.page) == (33, 44, 2)


@pytest.mark.parametrize("top", [65535, 4095])
def test_sixteen_bit_greys_are_scaled_not_cut_off(top):
    ramp = np.linspace(0, top, 256).astype(np.uint16).reshape(16, 16)
    got = load(file_of(Image.fromarray(ramp), "TIFF")).pixels.ravel().astype(int)
    assert got[0] == 0 and got[-1] == 255
    assert np.abs(got - np.arange(256)).max() <= 1


def test_alpha_lies_on_white_and_grey_colour_becomes_grey():
    rgba = np.zeros((20, 20, 4), np.uint8)
    rgba[5:8, :, 3] = 255
    pixels = load(file_of(Image.fromarray(rgba), "PNG")).pixels
    assert pixels.ndim == 2 and pixels[0, 0] == 255 and pixels[6, 3] == 0


def test_cmyk_and_colour_become_rgb():
    red = Image.new("RGB", (32, 32), (200, 20, 20))
    assert load(file_of(red, "PNG")).pixels.shape == (32, 32, 3)
    cmyk = load(file_of(Image.new("CMYK", (32, 32), (0, 255, 255, 0)), "TIFF")).pixels
    assert cmyk[5, 5, 0] > 200 and cmyk[5, 5, 1] < 60


def test_pdf_page_is_drawn_at_the_asked_resolution():
    sheet = load(pdf_bytes(), page=2, dpi=150)
    assert (sheet.info.width, sheet.info.height, sheet.info.pages) == (300, 300, 2)
    assert sheet.info.media == "application/pdf" and sheet.info.dpi_x == 150
    assert sheet.pixels.min() == 255


def bomb(width, height):
    """A tiny PNG that claims to be huge."""

    def chunk(tag, body):
        return struct.pack(">I", len(body)) + tag + body + struct.pack(">I", zlib.crc32(tag + body))

    head = struct.pack(">IIBBBBB", width, height, 8, 0, 0, 0, 0)
    return b"\x89PNG\r\n\x1a\n" + chunk(b"IHDR", head) + chunk(b"IDAT", zlib.compress(b"\0" * 1000)) + chunk(b"IEND", b"")


ENCRYPTED = b"%PDF-1.4\n1 0 obj<</Type/Catalog>>endobj\ntrailer<</Root 1 0 R/Encrypt<</Filter/Standard/V 1/R 2/O(x)/U(y)/P -4>>>>\n%%EOF"


@pytest.mark.parametrize(
    ("data", "options", "code", "says"),
    [
        (b"", {}, "not-an-image", "empty"),
        (b"hello, this is a letter", {}, "not-an-image", "PNG, TIFF, JPEG or PDF"),
        (file_of(page_picture(), "PNG")[:-60], {}, "truncated", "again"),
        (file_of(page_picture(), "JPEG")[:200], {}, "truncated", "again"),
        (file_of(page_picture(), "PNG")[:12], {}, "truncated", "again"),
        (bomb(30000, 30000), {}, "too-large", "limit 160 million"),
        (bomb(15000, 15000), {}, "too-large", "more pixels"),
        (file_of(page_picture(), "PNG"), {"page": 2}, "no-such-page", "no page 2"),
        (file_of(page_picture(), "TIFF"), {"page": 0}, "no-such-page", "no page 0"),
        (pdf_bytes(), {"page": 3}, "no-such-page", "2 pages"),
        (pdf_bytes(), {"dpi": 20000}, "too-large", "dpi"),
        (b"%PDF-1.7 and nothing more", {}, "truncated", "damaged"),
        (ENCRYPTED, {}, "encrypted", "password"),
        (file_of(page_picture(), "PNG"), {"turn": 45}, "turn", "45"),
    ],
)
def test_bad_files_get_a_clear_error(data, options, code, says):
    with pytest.raises(SheetError) as caught:
        load(data, **options)
    assert caught.value.code == code
    assert says in caught.value.message


def test_limits_can_be_set():
    data = file_of(page_picture(), "PNG")
    with pytest.raises(SheetError) as caught:
        load(data, limits=Limits(pixels=1000))
    assert caught.value.code == "too-large"
    assert load(data, limits=Limits(pixels=2400)).info.width == 60
