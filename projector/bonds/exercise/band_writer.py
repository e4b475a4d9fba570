"""Writes `band_kernels.py`: the weighted sum over a band as one unrolled expression per band width.

A loop over the band inside the lane loop is not vectorised well by the compiler; one expression is. Run this module
to write the file again; a test holds the committed file to it.
"""

from __future__ import annotations

from pathlib import Path

BANDS = (9, 13, 21)
LANES = (16, 1)

HEAD = '''"""Weighted sums over a band, unrolled (written by `band_writer`; do not edit by hand)."""

from __future__ import annotations

import numpy as np

from projector.arithmetic.kernels import Floats, Integers, kernel
'''

FUNCTION = '''

@kernel
def step_back_{band}_by_{lanes}(
    lo: int, hi: int, base: int, row: int, band_start: Integers, weights: Floats, carried: Floats,
    value: Floats, flow: Floats, factor: Floats, out: Floats,
) -> None:  # fmt: skip
    """One step of the recursion, band of {band} nodes by {lanes}: out = factor x (sum of W V + paid on the way)."""
    n = np.uint64({lanes})  # a constant: no remainder
    for i in range(lo, hi + 1):
        r = np.uint64(i - row)
        s = np.uint64(band_start[r] - base) * n
        o = np.uint64(i - base) * n
        total = carried[r]
{loads}
{body}'''


def one_function(band: int, lanes: int) -> str:
    """Source of the kernel for one band width and number of lanes."""
    loads = "\n".join(f"        w{j} = weights[r, np.uint64({j})]" for j in range(band))
    margin, lane = ("        ", "") if lanes == 1 else ("            ", " + lane")
    head = "" if lanes == 1 else "        for lane in range(n):\n"
    at = "np.uint64(0)" if lanes == 1 else "lane"
    terms = "\n".join(
        f"{margin}    {'+ ' if j else ''}w{j} * value[s{lane}{f' + np.uint64({j}) * n' if j else ''}]"
        for j in range(band)
    )
    body = f"{head}{margin}out[o{lane}] = factor[{at}] * (\n{terms}\n{margin}    + total * flow[{at}]\n{margin})\n"
    return FUNCTION.format(band=band, lanes=lanes, loads=loads, body=body)


def band_kernels() -> str:
    """Source of the whole file."""
    return HEAD + "".join(one_function(band, lanes) for band in BANDS for lanes in LANES)


if __name__ == "__main__":
    Path(__file__).with_name("band_kernels.py").write_text(band_kernels(), encoding="utf-8")
