"""Elementary functions and kernel set-up on which every bit of a result depends.

Importing this package chooses where compiled kernels are kept. The folder is named by a hash of all kernel
sources: a compiled kernel that calls another one is not re-made by the compiler when only the other changes, so a
shared folder could serve stale numbers without a word.
"""

from projector.arithmetic.kernels import KERNELS_DIGEST, kernel

__all__ = ["KERNELS_DIGEST", "kernel"]
