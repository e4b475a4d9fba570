"""Weighted sums over a band, unrolled (written by `band_writer`; do not edit by hand)."""

from __future__ import annotations

import numpy as np

from projector.arithmetic.kernels import Floats, Integers, kernel


@kernel
def step_back_9_by_16(
    lo: int, hi: int, base: int, row: int, band_start: Integers, weights: Floats, carried: Floats,
    value: Floats, flow: Floats, factor: Floats, out: Floats,
) -> None:  # fmt: skip
    """One step of the recursion, band of 9 nodes by 16: out = factor x (sum of W V + paid on the way)."""
    n = np.uint64(16)  # a constant: no remainder
    for i in range(lo, hi + 1):
        r = np.uint64(i - row)
        s = np.uint64(band_start[r] - base) * n
        o = np.uint64(i - base) * n
        total = carried[r]
        w0 = weights[r, np.uint64(0)]
        w1 = weights[r, np.uint64(1)]
        w2 = weights[r, np.uint64(2)]
        w3 = weights[r, np.uint64(3)]
        w4 = weights[r, np.uint64(4)]
        w5 = weights[r, np.uint64(5)]
        w6 = weights[r, np.uint64(6)]
        w7 = weights[r, np.uint64(7)]
        w8 = weights[r, np.uint64(8)]
        for lane in range(n):
            out[o + lane] = factor[lane] * (
                w0 * value[s + lane]
                + w1 * value[s + lane + np.uint64(1) * n]
                + w2 * value[s + lane + np.uint64(2) * n]
                + w3 * value[s + lane + np.uint64(3) * n]
                + w4 * value[s + lane + np.uint64(4) * n]
                + w5 * value[s + lane + np.uint64(5) * n]
                + w6 * value[s + lane + np.uint64(6) * n]
                + w7 * value[s + lane + np.uint64(7) * n]
                + w8 * value[s + lane + np.uint64(8) * n]
                + total * flow[lane]
            )


@kernel
def step_back_9_by_1(
    lo: int, hi: int, base: int, row: int, band_start: Integers, weights: Floats, carried: Floats,
    value: Floats, flow: Floats, factor: Floats, out: Floats,
) -> None:  # fmt: skip
    """One step of the recursion, band of 9 nodes by 1: out = factor x (sum of W V + paid on the way)."""
    n = np.uint64(1)  # a constant: no remainder
    for i in range(lo, hi + 1):
        r = np.uint64(i - row)
        s = np.uint64(band_start[r] - base) * n
        o = np.uint64(i - base) * n
        total = carried[r]
        w0 = weights[r, np.uint64(0)]
        w1 = weights[r, np.uint64(1)]
        w2 = weights[r, np.uint64(2)]
        w3 = weights[r, np.uint64(3)]
        w4 = weights[r, np.uint64(4)]
        w5 = weights[r, np.uint64(5)]
        w6 = weights[r, np.uint64(6)]
        w7 = weights[r, np.uint64(7)]
        w8 = weights[r, np.uint64(8)]
        out[o] = factor[np.uint64(0)] * (
            w0 * value[s]
            + w1 * value[s + np.uint64(1) * n]
            + w2 * value[s + np.uint64(2) * n]
            + w3 * value[s + np.uint64(3) * n]
            + w4 * value[s + np.uint64(4) * n]
            + w5 * value[s + np.uint64(5) * n]
            + w6 * value[s + np.uint64(6) * n]
            + w7 * value[s + np.uint64(7) * n]
            + w8 * value[s + np.uint64(8) * n]
            + total * flow[np.uint64(0)]
        )


@kernel
def step_back_13_by_16(
    lo: int, hi: int, base: int, row: int, band_start: Integers, weights: Floats, carried: Floats,
    value: Floats, flow: Floats, factor: Floats, out: Floats,
) -> None:  # fmt: skip
    """One step of the recursion, band of 13 nodes by 16: out = factor x (sum of W V + paid on the way)."""
    n = np.uint64(16)  # a constant: no remainder
    for i in range(lo, hi + 1):
        r = np.uint64(i - row)
        s = np.uint64(band_start[r] - base) * n
        o = np.uint64(i - base) * n
        total = carried[r]
        w0 = weights[r, np.uint64(0)]
        w1 = weights[r, np.uint64(1)]
        w2 = weights[r, np.uint64(2)]
        w3 = weights[r, np.uint64(3)]
        w4 = weights[r, np.uint64(4)]
        w5 = weights[r, np.uint64(5)]
        w6 = weights[r, np.uint64(6)]
        w7 = weights[r, np.uint64(7)]
        w8 = weights[r, np.uint64(8)]
        w9 = weights[r, np.uint64(9)]
        w10 = weights[r, np.uint64(10)]
        w11 = weights[r, np.uint64(11)]
        w12 = weights[r, np.uint64(12)]
        for lane in range(n):
            out[o + lane] = factor[lane] * (
                w0 * value[s + lane]
                + w1 * value[s + lane + np.uint64(1) * n]
                + w2 * value[s + lane + np.uint64(2) * n]
                + w3 * value[s + lane + np.uint64(3) * n]
                + w4 * value[s + lane + np.uint64(4) * n]
                + w5 * value[s + lane + np.uint64(5) * n]
                + w6 * value[s + lane + np.uint64(6) * n]
                + w7 * value[s + lane + np.uint64(7) * n]
                + w8 * value[s + lane + np.uint64(8) * n]
                + w9 * value[s + lane + np.uint64(9) * n]
                + w10 * value[s + lane + np.uint64(10) * n]
                + w11 * value[s + lane + np.uint64(11) * n]
                + w12 * value[s + lane + np.uint64(12) * n]
                + total * flow[lane]
            )


@kernel
def step_back_13_by_1(
    lo: int, hi: int, base: int, row: int, band_start: Integers, weights: Floats, carried: Floats,
    value: Floats, flow: Floats, factor: Floats, out: Floats,
) -> None:  # fmt: skip
    """One step of the recursion, band of 13 nodes by 1: out = factor x (sum of W V + paid on the way)."""
    n = np.uint64(1)  # a constant: no remainder
    for i in range(lo, hi + 1):
        r = np.uint64(i - row)
        s = np.uint64(band_start[r] - base) * n
        o = np.uint64(i - base) * n
        total = carried[r]
        w0 = weights[r, np.uint64(0)]
        w1 = weights[r, np.uint64(1)]
        w2 = weights[r, np.uint64(2)]
        w3 = weights[r, np.uint64(3)]
        w4 = weights[r, np.uint64(4)]
        w5 = weights[r, np.uint64(5)]
        w6 = weights[r, np.uint64(6)]
        w7 = weights[r, np.uint64(7)]
        w8 = weights[r, np.uint64(8)]
        w9 = weights[r, np.uint64(9)]
        w10 = weights[r, np.uint64(10)]
        w11 = weights[r, np.uint64(11)]
        w12 = weights[r, np.uint64(12)]
        out[o] = factor[np.uint64(0)] * (
            w0 * value[s]
            + w1 * value[s + np.uint64(1) * n]
            + w2 * value[s + np.uint64(2) * n]
            + w3 * value[s + np.uint64(3) * n]
            + w4 * value[s + np.uint64(4) * n]
            + w5 * value[s + np.uint64(5) * n]
            + w6 * value[s + np.uint64(6) * n]
            + w7 * value[s + np.uint64(7) * n]
            + w8 * value[s + np.uint64(8) * n]
            + w9 * value[s + np.uint64(9) * n]
            + w10 * value[s + np.uint64(10) * n]
            + w11 * value[s + np.uint64(11) * n]
            + w12 * value[s + np.uint64(12) * n]
            + total * flow[np.uint64(0)]
        )


@kernel
def step_back_21_by_16(
    lo: int, hi: int, base: int, row: int, band_start: Integers, weights: Floats, carried: Floats,
    value: Floats, flow: Floats, factor: Floats, out: Floats,
) -> None:  # fmt: skip
    """One step of the recursion, band of 21 nodes by 16: out = factor x (sum of W V + paid on the way)."""
    n = np.uint64(16)  # a constant: no remainder
    for i in range(lo, hi + 1):
        r = np.uint64(i - row)
        s = np.uint64(band_start[r] - base) * n
        o = np.uint64(i - base) * n
        total = carried[r]
        w0 = weights[r, np.uint64(0)]
        w1 = weights[r, np.uint64(1)]
        w2 = weights[r, np.uint64(2)]
        w3 = weights[r, np.uint64(3)]
        w4 = weights[r, np.uint64(4)]
        w5 = weights[r, np.uint64(5)]
        w6 = weights[r, np.uint64(6)]
        w7 = weights[r, np.uint64(7)]
        w8 = weights[r, np.uint64(8)]
        w9 = weights[r, np.uint64(9)]
        w10 = weights[r, np.uint64(10)]
        w11 = weights[r, np.uint64(11)]
        w12 = weights[r, np.uint64(12)]
        w13 = weights[r, np.uint64(13)]
        w14 = weights[r, np.uint64(14)]
        w15 = weights[r, np.uint64(15)]
        w16 = weights[r, np.uint64(16)]
        w17 = weights[r, np.uint64(17)]
        w18 = weights[r, np.uint64(18)]
        w19 = weights[r, np.uint64(19)]
        w20 = weights[r, np.uint64(20)]
        for lane in range(n):
            out[o + lane] = factor[lane] * (
                w0 * value[s + lane]
                + w1 * value[s + lane + np.uint64(1) * n]
                + w2 * value[s + lane + np.uint64(2) * n]
                + w3 * value[s + lane + np.uint64(3) * n]
                + w4 * value[s + lane + np.uint64(4) * n]
                + w5 * value[s + lane + np.uint64(5) * n]
                + w6 * value[s + lane + np.uint64(6) * n]
                + w7 * value[s + lane + np.uint64(7) * n]
                + w8 * value[s + lane + np.uint64(8) * n]
                + w9 * value[s + lane + np.uint64(9) * n]
                + w10 * value[s + lane + np.uint64(10) * n]
                + w11 * value[s + lane + np.uint64(11) * n]
                + w12 * value[s + lane + np.uint64(12) * n]
                + w13 * value[s + lane + np.uint64(13) * n]
                + w14 * value[s + lane + np.uint64(14) * n]
                + w15 * value[s + lane + np.uint64(15) * n]
                + w16 * value[s + lane + np.uint64(16) * n]
                + w17 * value[s + lane + np.uint64(17) * n]
                + w18 * value[s + lane + np.uint64(18) * n]
                + w19 * value[s + lane + np.uint64(19) * n]
                + w20 * value[s + lane + np.uint64(20) * n]
                + total * flow[lane]
            )


@kernel
def step_back_21_by_1(
    lo: int, hi: int, base: int, row: int, band_start: Integers, weights: Floats, carried: Floats,
    value: Floats, flow: Floats, factor: Floats, out: Floats,
) -> None:  # fmt: skip
    """One step of the recursion, band of 21 nodes by 1: out = factor x (sum of W V + paid on the way)."""
    n = np.uint64(1)  # a constant: no remainder
    for i in range(lo, hi + 1):
        r = np.uint64(i - row)
        s = np.uint64(band_start[r] - base) * n
        o = np.uint64(i - base) * n
        total = carried[r]
        w0 = weights[r, np.uint64(0)]
        w1 = weights[r, np.uint64(1)]
        w2 = weights[r, np.uint64(2)]
        w3 = weights[r, np.uint64(3)]
        w4 = weights[r, np.uint64(4)]
        w5 = weights[r, np.uint64(5)]
        w6 = weights[r, np.uint64(6)]
        w7 = weights[r, np.uint64(7)]
        w8 = weights[r, np.uint64(8)]
        w9 = weights[r, np.uint64(9)]
        w10 = weights[r, np.uint64(10)]
        w11 = weights[r, np.uint64(11)]
        w12 = weights[r, np.uint64(12)]
        w13 = weights[r, np.uint64(13)]
        w14 = weights[r, np.uint64(14)]
        w15 = weights[r, np.uint64(15)]
        w16 = weights[r, np.uint64(16)]
        w17 = weights[r, np.uint64(17)]
        w18 = weights[r, np.uint64(18)]
        w19 = weights[r, np.uint64(19)]
        w20 = weights[r, np.uint64(20)]
        out[o] = factor[np.uint64(0)] * (
            w0 * value[s]
            + w1 * value[s + np.uint64(1) * n]
            + w2 * value[s + np.uint64(2) * n]
            + w3 * value[s + np.uint64(3) * n]
            + w4 * value[s + np.uint64(4) * n]
            + w5 * value[s + np.uint64(5) * n]
            + w6 * value[s + np.uint64(6) * n]
            + w7 * value[s + np.uint64(7) * n]
            + w8 * value[s + np.uint64(8) * n]
            + w9 * value[s + np.uint64(9) * n]
            + w10 * value[s + np.uint64(10) * n]
            + w11 * value[s + np.uint64(11) * n]
            + w12 * value[s + np.uint64(12) * n]
            + w13 * value[s + np.uint64(13) * n]
            + w14 * value[s + np.uint64(14) * n]
            + w15 * value[s + np.uint64(15) * n]
            + w16 * value[s + np.uint64(16) * n]
            + w17 * value[s + np.uint64(17) * n]
            + w18 * value[s + np.uint64(18) * n]
            + w19 * value[s + np.uint64(19) * n]
            + w20 * value[s + np.uint64(20) * n]
            + total * flow[np.uint64(0)]
        )
