"""PNG with a palette: the colours of a map once, and a byte a pixel.

Matplotlib writes red, green, blue and alpha, which makes a report twice as large: noise does not compress.
"""

from __future__ import annotations

import struct
import zlib

import numpy as np

_SIGNATURE = b"\x89PNG\r\n\x1a\n"


def palette_png(levels: np.ndarray, palette: np.ndarray) -> bytes:
    r"""Encode an image.

    Parameters
    ----------
    levels : uint8 array (rows, columns)
        Number of each pixel's colour.
    palette : uint8 array (256, 3)
        Red, green, blue of each colour.

    Returns
    -------
    bytes

    Notes
    -----
    Source: W3C Recommendation "Portable Network Graphics (PNG) Specification" (ISO/IEC 15948), sections 5
    (chunks), 9 (filters) and 11 (IHDR, PLTE, IDAT, IEND).

    Examples
    --------
    >>> palette_png(np.zeros((2, 3), np.uint8), np.zeros((256, 3), np.uint8))[12:24]
    b'IHDR\x00\x00\x00\x03\x00\x00\x00\x02'
    """
    rows, columns = levels.shape
    eight_bits, indexed = 8, 3
    header = struct.pack(">IIBBBBB", columns, rows, eight_bits, indexed, 0, 0, 0)
    # neighbouring numbers are neighbouring colours here, so filters may help; where not, none is used
    data = min((zlib.compress(_filtered(levels, choose), 9) for choose in (False, True)), key=len)
    colours = palette.astype(np.uint8).tobytes()
    chunks = ((b"IHDR", header), (b"PLTE", colours), (b"IDAT", data), (b"IEND", b""))
    return _SIGNATURE + b"".join(_chunk(name, content) for name, content in chunks)


def _chunk(name: bytes, content: bytes) -> bytes:
    return struct.pack(">I", len(content)) + name + content + struct.pack(">I", zlib.crc32(name + content))


def _filtered(levels: np.ndarray, choose: bool) -> bytes:
    """Put the number of its filter before each row; the one of the smallest differences when choosing."""
    x = levels.astype(np.int16)
    left = np.pad(x, ((0, 0), (1, 0)))[:, :-1]
    up = np.pad(x, ((1, 0), (0, 0)))[:-1]
    corner = np.pad(x, ((1, 0), (1, 0)))[:-1, :-1]
    guesses = [np.zeros_like(x)]
    if choose:
        guesses += [left, up, (left + up) // 2, _paeth(left, up, corner)]
    candidates = np.stack([x - guess for guess in guesses]).astype(np.uint8)
    size = np.abs(candidates.view(np.int8).astype(np.int16)).sum(axis=2)
    best = size.argmin(axis=0)
    chosen = candidates[best, np.arange(len(x))]
    return np.hstack([best[:, None].astype(np.uint8), chosen]).tobytes()


def _paeth(left: np.ndarray, up: np.ndarray, corner: np.ndarray) -> np.ndarray:
    """Return which of the three neighbours is nearest to left + up - corner; ties go in this order."""
    neighbours = np.stack([left, up, corner])
    nearest = np.abs(neighbours - (left + up - corner)).argmin(axis=0)
    return np.take_along_axis(neighbours, nearest[None], axis=0)[0]
