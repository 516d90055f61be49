"""Wealth of bets whose starts are mixed, in logarithms."""

from __future__ import annotations

import numpy as np
import numpy.typing as npt

FloatArray = npt.NDArray[np.float64]


def grow_wealth(log_wealth: FloatArray, log_l: FloatArray, log_start: FloatArray) -> FloatArray:
    """Follow S_t = (S_{t−1} + π_t)·L_t over a block.

    Under exchangeability each S plus the mass not yet started is a non-negative martingale of mean 1, since
    every L has conditional mean 1 and every π is fixed beforehand (Ville 1939, Étude critique de la notion de
    collectif). This is one of the places on which the guarantee rests.

    Parameters
    ----------
    log_wealth : (G,) log S before the block.
    log_l : (G, n) log L.
    log_start : (n,) log π.

    Returns
    -------
    path : (G, n) log S after each run.
    """
    total = np.cumsum(log_l, axis=1)
    started = np.empty((log_l.shape[0], log_l.shape[1] + 1))
    started[:, 0] = log_wealth
    started[:, 1] = log_start[0]
    np.subtract(log_start[1:], total[:, :-1], out=started[:, 2:])
    path = np.logaddexp.accumulate(started, axis=1)[:, 1:]
    path += total
    return path


def log_mean(paths: FloatArray) -> FloatArray:
    """Give the log of the mean of exp(paths) over the first axis."""
    return log_sum(paths) - np.log(paths.shape[0])


def log_sum(paths: FloatArray) -> FloatArray:
    """Give the log of the sum of exp(paths) over the first axis; −inf rows count nothing."""
    top = paths.max(axis=0)
    top = np.where(np.isfinite(top), top, 0.0)
    with np.errstate(divide="ignore"):
        summed: FloatArray = np.log(np.exp(paths - top).sum(axis=0)) + top
    return summed


def log_e_of(path: FloatArray, log_unspent: FloatArray) -> FloatArray:
    """Give a family's log e-value: the mean of its wealths plus the unspent mass."""
    return np.logaddexp(log_mean(path), log_unspent)
