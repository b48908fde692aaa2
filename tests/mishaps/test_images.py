"""Odd, broken and hostile images: the right texels, or an error that names the file and the reason."""

from __future__ import annotations

import io
import struct
import zlib

import imagecodecs
import numpy as np
import pytest
from PIL import Image
from tangentry.nodes.formats.image_headers import tag_of
from tangentry.nodes.formats.images import read_image, write_png, write_tiff
from tangentry.pipeline.errors import InputError

COLOURS = np.random.default_rng(0).integers(0, 256, (9, 5, 3), dtype=np.uint8)


def saved(image: Image.Image, format: str = "PNG", **how) -> np.ndarray:
    out = io.BytesIO()
    image.save(out, format, **how)
    return np.frombuffer(out.getvalue(), np.uint8)


def chunk(kind: bytes, data: bytes) -> bytes:
    return struct.pack(">I", len(data)) + kind + data + struct.pack(">I", zlib.crc32(kind + data))


def png(width: int, height: int, bits: int, colour: int, rows: bytes) -> np.ndarray:
    """A PNG of any header (PNG specification, 11.2)."""
    head = chunk(b"IHDR", struct.pack(">IIBBBBB", width, height, bits, colour, 0, 0, 0))
    body = b"\x89PNG\r\n\x1a\n" + head + chunk(b"IDAT", zlib.compress(rows)) + chunk(b"IEND", b"")
    return np.frombuffer(body, np.uint8)


def tiff(data: bytes, bits: int = 8, kind: int = 1, colours: tuple[int, ...] = (), **fields: int) -> np.ndarray:
    """A TIFF of one row of four texels (TIFF 6.0, section 2), with fields of other values, or given twice."""
    at = 8 + 2 + 12 * (9 + len(colours[:1]) + len(fields)) + 4
    entries = [(int(tag[1:]), 4, 1, value) for tag, value in fields.items()]
    entries += [(256, 4, 1, 4), (257, 4, 1, 1), (258, 3, 1, bits), (259, 3, 1, 1), (262, 3, 1, kind)]
    entries += [(273, 4, 1, at), (277, 3, 1, 1), (278, 4, 1, 1), (279, 4, 1, len(data))]
    entries += [(320, 3, len(colours), at + len(data))] if colours else []
    table = b"".join(struct.pack("<HHII", *entry) for entry in sorted(entries, key=lambda entry: entry[0]))
    head = b"II*\0" + struct.pack("<IH", 8, len(entries)) + table + bytes(4)
    return np.frombuffer(head + data + struct.pack(f"<{len(colours)}H", *colours), np.uint8)


@pytest.mark.parametrize("shape", [(1, 1, 3), (1, 31, 1), (7, 1, 4), (33, 17, 3)])
@pytest.mark.parametrize("write", [write_png, write_tiff])
def test_odd_sizes_are_read(write, shape):
    texels = np.random.default_rng(1).integers(0, 65536, shape).astype(np.uint16)

    assert (read_image(write(texels), "a") == texels).all()


def test_palettes_are_looked_up():
    found = read_image(
        saved(Image.fromarray(COLOURS).convert("P", palette=Image.Palette.ADAPTIVE, colors=256)), "a.png"
    )

    assert found.shape == COLOURS.shape and np.abs(found.astype(int) - COLOURS).max() <= 4


def test_grey_with_alpha_has_two_channels():
    grey = np.stack([COLOURS[..., 0], COLOURS[..., 1]], axis=2)

    image = Image.merge("LA", [Image.fromarray(grey[..., k]) for k in (0, 1)])

    assert (read_image(saved(image), "a.png") == grey).all()


@pytest.mark.parametrize(
    ("bits", "row", "expected"),
    [
        (1, b"\x00\xb0", [255, 0, 255, 255]),
        (2, b"\x00\xe4", [255, 170, 85, 0]),
        (4, b"\x00\xf0\x8c", [255, 0, 136, 204]),
    ],
)
def test_few_bits_are_spread_over_eight(bits, row, expected):
    assert read_image(png(4, 1, bits, 0, row), "a.png")[0, :, 0].tolist() == expected


@pytest.mark.parametrize(
    ("bits", "data", "expected"),
    [
        (1, b"\xb0", [255, 0, 255, 255]),
        (2, b"\xe4", [255, 170, 85, 0]),
        (4, b"\xf0\x8c", [255, 0, 136, 204]),
        (8, b"\xff\0\x01\x80", [255, 0, 1, 128]),
        (16, b"\xff\xff\0\0\x01\0\0\x80", [65535, 0, 1, 32768]),
    ],
)
@pytest.mark.parametrize("kind", [0, 1])
def test_greys_of_tiff_are_spread_and_black_is_zero(bits, data, expected, kind):
    """TIFF 6.0, PhotometricInterpretation: 0 white is zero; 1 black is zero."""
    found = read_image(tiff(data, bits, kind), "a.tif")

    most = 255 if bits <= 8 else 65535
    assert found[0, :, 0].tolist() == (expected if kind else [most - one for one in expected])


@pytest.mark.parametrize(("bits", "data"), [(1, b"\x50"), (2, b"\x11"), (4, b"\x01\x01"), (8, b"\0\1\0\1")])
def test_palettes_of_tiff_are_looked_up(bits, data):
    size = 1 << bits
    colours = tuple(256 * (10 * channel + k % 2) for channel in (1, 2, 3) for k in range(size))

    found = read_image(tiff(data, bits, 3, colours), "a.tif")

    assert found.tolist() == [[[10, 20, 30], [11, 21, 31]] * 2]


@pytest.mark.parametrize("how", [{"big_tiff": True}, {"compression": "tiff_lzw"}, {"compression": "packbits"}])
def test_tiff_of_all_sorts_is_read(how):
    assert (read_image(saved(Image.fromarray(COLOURS), "TIFF", **how), "a.tif") == COLOURS).all()


def test_tiff_tells_of_losses_and_profiles():
    image = Image.fromarray(COLOURS)

    assert tag_of(saved(image, "TIFF", compression="jpeg")) == "lossy"
    assert tag_of(saved(image, "TIFF", icc_profile=b"a profile")) == "sRGB"
    assert tag_of(saved(image, "TIFF")) == tag_of(saved(image, "TIFF", big_tiff=True)) == ""


def test_interlaced_images_are_read():
    assert (read_image(saved(Image.fromarray(COLOURS), "PNG", interlace=1), "a.png") == COLOURS).all()


def test_jpeg_and_webp_are_read():
    smooth = np.tile(np.linspace(0, 255, 64).astype(np.uint8)[:, None, None], (1, 64, 3))

    assert (
        np.abs(read_image(saved(Image.fromarray(smooth), "JPEG", quality=95), "a.jpg").astype(int) - smooth).max() < 6
    )
    assert (read_image(saved(Image.fromarray(COLOURS), "WEBP", lossless=True), "a.webp") == COLOURS).all()


@pytest.mark.parametrize("format", ["JPEG", "TIFF"])
def test_cmyk_is_refused(format):
    with pytest.raises(InputError, match=r"a\.img: .*CMYK"):
        read_image(saved(Image.fromarray(COLOURS).convert("CMYK"), format), "a.img")


@pytest.mark.parametrize(
    ("content", "found"),
    [
        (saved(Image.fromarray(COLOURS).convert("LAB"), "TIFF"), "colours of kind 8"),
        (tiff(bytes(4), t277=60_000), "60000 samples a pixel"),
        (tiff(bytes(4), t258=0), "samples of 0 bits"),
        (tiff(bytes(4), t258=60_000), "samples of 60000 bits"),
        (tiff(bytes(4), kind=3), "colour 0 of a palette of 0"),
        (tiff(b"\0\1\2\3", kind=3, colours=(0, 1, 2)), "colour 3 of a palette of 1"),
        (tiff(bytes(4), t256=60_000, t257=60_000), "60000 x 60000 pixels, more than"),
        (tiff(bytes(4), t322=2**30, t323=2**30), "can't be decoded"),
    ],
    ids=["Lab", "samples", "no bits", "bits", "no palette", "short palette", "size", "tile"],
)
def test_tiff_of_no_plain_channels_and_hostile_tiff_is_refused(content, found):
    with pytest.raises(InputError, match=rf"a\.tif: .*{found}"):
        read_image(content, "a.tif")


@pytest.mark.parametrize(
    "content",
    [
        png(60_000, 60_000, 8, 2, b""),
        png(2**31 - 1, 2, 1, 0, b""),
        np.frombuffer(b"RIFF\x1e\0\0\0WEBPVP8X\x0a\0\0\0" + bytes(4) + b"\xff\xff\xff\xff\xff\xff", np.uint8),
    ],
    ids=["PNG", "PNG of one bit", "WebP"],
)
def test_a_small_file_cannot_announce_a_huge_image(content):
    with pytest.raises(InputError, match=r"a: header: \d+ x \d+ pixels, more than the 268,435,456"):
        read_image(content, "a")


@pytest.mark.parametrize("format", ["PNG", "JPEG", "WEBP", "TIFF"])
@pytest.mark.parametrize("share", [0, 0.02, 0.3, 0.7])
def test_what_is_cut_off_is_refused(format, share):
    whole = saved(Image.fromarray(np.random.default_rng(2).integers(0, 256, (40, 40, 3), dtype=np.uint8)), format)

    with pytest.raises(InputError, match=r"a\.img"):
        read_image(whole[: int(len(whole) * share)], "a.img")


@pytest.mark.parametrize("format", ["PNG", "JPEG", "WEBP", "TIFF", "TIFF palette"])
def test_any_byte_may_be_wrong(format):
    image = Image.fromarray(COLOURS).convert("P" if "palette" in format else "RGB")
    whole = saved(image, format.split()[0])
    for at in range(len(whole)):
        content = whole.copy()
        content[at] ^= 0x5A
        try:
            texels = read_image(content, "a.img", pixels=10_000)
        except InputError as error:
            assert "a.img" in str(error)
        else:
            assert texels.ndim == 3


@pytest.mark.parametrize(
    "content", [b"", b"hello", b"GIF89a" + bytes(20), b"\x89PNG\r\n\x1a\n", b"\xff\xd8\xff", b"II*\0"]
)
def test_what_is_no_image_is_refused(content):
    with pytest.raises(InputError, match=r"^a"):
        read_image(np.frombuffer(content, np.uint8), "a")


@pytest.mark.parametrize("bad", [np.nan, np.inf])
def test_floats_must_be_finite(bad):
    texels = np.ones((3, 4, 3), np.float32)
    texels[1, 2, 0] = bad

    with pytest.raises(InputError, match=r"a\.tif: pixel \(2, 1\): not a finite number"):
        read_image(write_tiff(texels), "a.tif")


def test_exr_must_be_finite_and_whole():
    pytest.importorskip("OpenEXR", reason="the extra `exr` is not installed")
    from tangentry.nodes.formats.exr import write_exr

    texels = np.ones((8, 8, 3), np.float32)
    whole = write_exr(texels, False, "a.exr")
    texels[3, 5] = np.nan
    with pytest.raises(InputError, match=r"a\.exr: pixel \(5, 3\)"):
        read_image(write_exr(texels, False, "a.exr"), "a.exr")
    for size in (4, 8, 40, len(whole) // 2, len(whole) - 4):
        with pytest.raises(InputError, match=r"a\.exr"):
            read_image(whole[:size], "a.exr")


def exr(tmp_path, names, shape=(8, 8)) -> np.ndarray:
    library = pytest.importorskip("OpenEXR", reason="the extra `exr` is not installed")
    header = {"compression": library.ZIP_COMPRESSION, "type": library.scanlineimage}
    library.File(header, {name: np.ones(shape, np.float16) for name in names}).write(str(tmp_path / "a.exr"))
    return np.fromfile(tmp_path / "a.exr", np.uint8)


def test_exr_gives_colours_among_other_channels(tmp_path):
    assert read_image(exr(tmp_path, ["depth.Z", "R", "G", "B"]), "a.exr").shape == (8, 8, 3)
    assert read_image(exr(tmp_path, ["X", "Z"]), "a.exr").shape == (8, 8, 2)


def test_exr_of_many_channels_is_refused_by_its_header(tmp_path):
    with pytest.raises(InputError, match=r"a\.exr: header: 200 channels of 8 x 8"):
        read_image(exr(tmp_path, [f"layer{k}" for k in range(200)]), "a.exr")


def test_any_byte_of_exr_may_be_wrong(tmp_path):
    whole = exr(tmp_path, ["R", "G", "B"], (5, 3))
    for at in range(len(whole)):
        content = whole.copy()
        content[at] ^= 0x5A
        try:
            texels = read_image(content, "a.exr", pixels=10_000)
        except InputError as error:
            assert "a.exr" in str(error)
        else:
            assert texels.dtype == np.float32 and texels.ndim == 3


def test_signed_and_wide_whole_numbers_are_refused():
    with pytest.raises(InputError, match="texels of type int32"):
        read_image(np.frombuffer(imagecodecs.tiff_encode(np.ones((2, 2), np.int32)), np.uint8), "a.tif")
