"""Error ratios that a forward error correction still repairs: by name, each with its source.

A threshold is a convention of its code, an interleaver and a confidence, not a law; papers quote several for one code.
"""

from __future__ import annotations

from dataclasses import dataclass


@dataclass(frozen=True)
class Threshold:
    """`ber` before correction; `overhead` as a fraction; `source` in words."""

    name: str
    ber: float
    overhead: float
    source: str


_ALL = (
    Threshold(
        "7 % overhead hard-decision FEC",
        3.8e-3,
        0.067,
        "figure in general use for the concatenated codes of ITU-T G.975.1 appendix I; from memory",
    ),
    Threshold(
        "Reed-Solomon (255, 239)",
        8.27e-5,
        16 / 239,
        "ITU-T G.975: 8 symbol errors corrected in 255, output 1e-15, independent errors",
    ),
    Threshold(
        "staircase, 6.7 % overhead",
        4.5e-3,
        16 / 239,
        "ITU-T G.709.2; B. P. Smith et al., Journal of Lightwave Technology 30(1), 110, 2012; figure in general use",
    ),
    Threshold("concatenated FEC, 14.8 % overhead", 1.25e-2, 0.148, "OIF-400ZR implementation agreement"),
    Threshold("open FEC, 15.3 % overhead", 2.0e-2, 0.153, "OpenZR+ multi-source agreement; ITU-T G.709.3"),
    Threshold("20 % overhead soft-decision FEC", 2.4e-2, 0.20, "figure in general use; 2e-2 and 2.7e-2 are used too"),
    Threshold(
        "Reed-Solomon (544, 514)",
        2.26e-4,
        30 / 514,
        "IEEE 802.3 clause 91: 15 symbols of 10 bits corrected, output 1e-15, independent errors; from memory",
    ),
)
THRESHOLDS: dict[str, Threshold] = {entry.name: entry for entry in _ALL}


def threshold(name: str) -> Threshold:
    """The named threshold; KeyError whose words list the known names.

    >>> threshold("7 % overhead hard-decision FEC").ber
    0.0038
    """
    if name not in THRESHOLDS:
        raise KeyError(f"There is no threshold {name!r}; the known ones are {', '.join(THRESHOLDS)}")
    return THRESHOLDS[name]
