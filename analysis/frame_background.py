"""Robust background of a frame that has been averaged down.

Medians of square blocks; blocks that stand out of a smooth surface (they lie under a
spot) are replaced by it; the rest is kept and interpolated.
"""

from functools import lru_cache

import cv2
import numpy as np
from numpy.typing import NDArray

Float32Array = NDArray[np.float32]
_BAND_ROWS = 256


def averaged_down(
    frame: NDArray[np.uint16], factor: int, brightest: int | None = None
) -> Float32Array:
    """``frame`` (rows, columns), hot pixels out, averaged in factor x factor blocks.

    The median of 3 x 3 pixels takes single hot and dead pixels out. Values are moved
    to the top of their words first: whole numbers would round the noise away. Rows and
    columns that do not fill a block are left out. Shape (rows // factor, columns //
    factor). ``brightest`` is the frame's highest value where it is known.
    """
    rows, columns = frame.shape[0] // factor, frame.shape[1] // factor
    kept = frame[: rows * factor, : columns * factor]
    if factor == 1:
        return np.asarray(cv2.medianBlur(kept, 3), dtype=np.float32)
    if brightest is None:
        brightest = int(kept.max(initial=1))
    spare = 16 - max(brightest, 1).bit_length()
    light = np.empty((rows, columns), dtype=np.float32)
    # Band by band: what is needed in between stays in the processor's cache.
    band = max(_BAND_ROWS // factor, 1)
    room = np.empty((band * factor + 2, kept.shape[1]), dtype=np.uint16)
    for top in range(0, rows, band):
        end = min(top + band, rows)
        light[top:end] = _band_mean(kept, (top, end), factor, spare, room)
    light *= np.float32(2.0**-spare)
    return light


def _band_mean(
    frame: NDArray[np.uint16],
    band: tuple[int, int],
    factor: int,
    spare: int,
    room: NDArray[np.uint16],
) -> NDArray[np.uint16]:
    """Means of blocks in the rows ``band`` of blocks, moved up by ``spare`` bits.

    ``room`` is memory to work in, two rows more than a band has.
    """
    columns = frame.shape[1] // factor
    top, end = band[0] * factor, band[1] * factor
    above = min(top, 1)
    words = frame[top - above : end + 1]
    clean = cv2.medianBlur(words, 3, dst=room[: words.shape[0]])
    small = np.asarray(clean, dtype=np.uint16)[above : above + end - top]
    np.left_shift(small, spare, out=small)
    rows = end - top
    # Halving twice is four times faster than one step, and as good.
    while factor % 2 == 0:
        factor //= 2
        rows //= 2
        small = _mean(small, columns * factor, rows)
    if factor > 1:
        small = _mean(small, columns, rows // factor)
    return small


def _mean(words: NDArray[np.uint16], columns: int, rows: int) -> NDArray[np.uint16]:
    out = cv2.resize(words, (columns, rows), interpolation=cv2.INTER_AREA)
    return np.asarray(out, dtype=np.uint16)


def background_map(small: Float32Array, *, block: int = 16) -> Float32Array:
    """The background of ``small`` (rows, columns), same shape, same unit.

    ``block`` is the side of a block in elements of ``small``.
    """
    rows, columns = small.shape
    grid = _cleaned(_block_medians(small, block))
    full = cv2.resize(
        grid,
        (grid.shape[1] * block, grid.shape[0] * block),
        interpolation=cv2.INTER_LINEAR,
    )
    return np.asarray(full[:rows, :columns], dtype=np.float32)


def robust_width(values: Float32Array) -> float:
    """Standard deviation of the bulk of ``values``, from the median deviation."""
    sample = values.ravel()
    if sample.size > 8000:
        sample = sample[:: sample.size // 8000 + 1]
    middle = np.median(sample)
    return 1.4826 * float(np.median(np.abs(sample - middle)))


def _block_medians(small: Float32Array, block: int) -> Float32Array:
    rows, columns = small.shape
    below, right = -rows % block, -columns % block
    padded = np.pad(small, ((0, below), (0, right)), mode="symmetric")
    high, wide = padded.shape[0] // block, padded.shape[1] // block
    # Every other element both ways is enough for a median and four times faster.
    blocks = padded.reshape(high, block, wide, block)[:, ::2, :, ::2].swapaxes(1, 2)
    flat = np.ascontiguousarray(blocks).reshape(high, wide, -1)
    middle = flat.shape[2] // 2
    return np.partition(flat, middle, axis=2)[..., middle]


def _cleaned(grid: Float32Array) -> Float32Array:
    """Block medians with the ones under spots replaced by a smooth surface."""
    rows, columns = grid.shape
    if rows < 3 or columns < 3:
        return np.full_like(grid, np.median(grid))
    design = _surface_terms(rows, columns)
    values = grid.astype(np.float64).ravel()
    kept = np.ones(values.size, dtype=bool)
    surface = np.full(values.size, float(np.median(values)))
    for _ in range(6):
        width = 1.4826 * float(np.median(np.abs(values[kept] - surface[kept])))
        # A spot only adds light, so the upper side is cut more tightly.
        away = values - surface
        before = kept
        kept = (away < 3.0 * width + 1e-9) & (away > -6.0 * width - 1e-9)
        if np.count_nonzero(kept) < 2 * design.shape[1]:
            return np.full_like(grid, np.median(grid))
        of_kept = design[kept]
        # Powers of -1 .. 1 up to the third: normal equations are good enough; a touch
        # on the diagonal settles what the kept blocks do not tell.
        normal = of_kept.T @ of_kept + 1e-9 * values.size * np.eye(design.shape[1])
        terms = np.linalg.solve(normal, of_kept.T @ values[kept])
        surface = design @ terms
        if np.array_equal(before, kept):
            break
    clean = np.where(kept, values, surface).reshape(rows, columns)
    return np.asarray(clean, dtype=np.float32)


@lru_cache(maxsize=8)
def _surface_terms(rows: int, columns: int) -> NDArray[np.float64]:
    """Products of powers up to the second (third along long sides), (blocks, terms)."""
    y = np.linspace(-1.0, 1.0, rows)[:, None] + np.zeros((1, columns))
    x = np.linspace(-1.0, 1.0, columns)[None, :] + np.zeros((rows, 1))
    powers = [(0, 0), (1, 0), (0, 1), (1, 1)]
    if min(rows, columns) >= 5:
        powers += [(2, 0), (0, 2)]
    if rows * columns >= 60:
        powers += [(2, 1), (1, 2), (3, 0), (0, 3)]
    return np.stack([(x**i * y**j).ravel() for i, j in powers], axis=1)
