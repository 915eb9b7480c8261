"""Ranks of sources and which neighbours cannot be told apart."""

import numpy as np

HALF_WIDTH = 1.959963984540054  # of a 95 % interval, in standard deviations


def ranks(values: np.ndarray, resampled: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """Rank (M, G) from 1, greatest first, and `tied` (M, G): not told apart from the one ranked just above.

    `resampled` (M, R, G) are bootstrap values drawn together, so that the difference of two neighbours is
    paired: they are tied where its 95 % interval contains 0.
    """
    order = np.argsort(-values, axis=1, kind="stable")
    number = np.broadcast_to(np.arange(values.shape[1]), values.shape)
    rank = np.empty_like(order)
    np.put_along_axis(rank, order, number + 1, axis=1)
    gap = -np.diff(np.take_along_axis(values, order, axis=1), axis=1)
    drawn = np.diff(np.take_along_axis(resampled, order[:, None, :], axis=2), axis=2)
    close = gap <= HALF_WIDTH * drawn.std(axis=1, ddof=1)
    tied = np.zeros(values.shape, dtype=bool)
    np.put_along_axis(tied, order[:, 1:], close, axis=1)
    return rank, tied


def half_width(resampled: np.ndarray) -> np.ndarray:
    """Half width of the 95 % interval (M, G) from bootstrap values (M, R, G)."""
    return HALF_WIDTH * resampled.std(axis=1, ddof=1)
