"""Measurements of an invented body in the form that the body-model package yeadon takes, in m.

Lengths (L), perimeters (p), widths (w) and depths (d) at the package's levels; a plain adult of
about 1.76 m, made up for the tests.
"""

from __future__ import annotations

TRUNK = {
    "Ls1L": 0.16, "Ls2L": 0.28, "Ls3L": 0.41, "Ls4L": 0.54, "Ls5L": 0.58, "Ls6L": 0.17,
    "Ls7L": 0.25, "Ls8L": 0.31,
    "Ls0p": 0.90, "Ls1p": 0.82, "Ls2p": 0.85, "Ls3p": 0.95, "Ls5p": 0.40, "Ls6p": 0.50,
    "Ls7p": 0.57,
    "Ls0w": 0.34, "Ls1w": 0.31, "Ls2w": 0.31, "Ls3w": 0.33, "Ls4w": 0.36, "Ls4d": 0.20,
}  # fmt: skip
ARM = {
    "2L": 0.30, "3L": 0.40, "4L": 0.56, "5L": 0.03, "6L": 0.09, "7L": 0.19,
    "0p": 0.36, "1p": 0.30, "2p": 0.26, "3p": 0.26, "4p": 0.17, "5p": 0.24, "6p": 0.21,
    "7p": 0.16, "4w": 0.06, "5w": 0.09, "6w": 0.085, "7w": 0.07,
}  # fmt: skip
LEG = {
    "1L": 0.08, "3L": 0.41, "4L": 0.53, "5L": 0.83, "6L": 0.02, "8L": 0.15, "9L": 0.21,
    "1p": 0.56, "2p": 0.50, "3p": 0.37, "4p": 0.37, "5p": 0.23, "6p": 0.32, "7p": 0.25,
    "8p": 0.24, "9p": 0.18, "8w": 0.095, "9w": 0.08, "6d": 0.11,
}  # fmt: skip

MEASUREMENTS = {
    **TRUNK,
    **{f"L{side}{key}": value for side in "ab" for key, value in ARM.items()},
    **{f"L{side}{key}": value for side in "jk" for key, value in LEG.items()},
}
