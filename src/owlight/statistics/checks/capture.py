"""Is a record plausible at all? Plain numbers of its lanes; a bad answer means no BER from it."""

from __future__ import annotations

from collections.abc import Collection, Mapping

from owlight.statistics.checks.finding import BAD, OK, Limits, certain, judged
from owlight.vocabulary.events import Check

# a Gaussian lane has 4.7e-4 of its samples beyond 3.5 and 6e-5 beyond 4 standard deviations
CLIPPED_FRACTION = Limits(doubtful=1e-4, bad=1e-3)
LEAST_DEVIATION_CODES = 0.5
"""A live lane shows at least its converter's noise; a stuck one repeats one code, or two neighbouring ones rarely."""
LANES_ALIKE_DB = Limits(doubtful=3.0, bad=10.0)


def clipping(subject: str, clipped_fraction: Mapping[str, float], limits: Limits = CLIPPED_FRACTION) -> Check:
    """How much of the worst lane lies at either end of its range."""
    lane, worst = max(clipped_fraction.items(), key=lambda item: item[1])
    return judged(
        "clipping", subject, worst, limits, f"{worst:.2g} of the samples of lane {lane} are at its range's end"
    )


def dead_lane(subject: str, deviation_codes: Mapping[str, float], least: float = LEAST_DEVIATION_CODES) -> Check:
    """Does every lane move? `deviation_codes` is each lane's standard deviation in codes."""
    lane, weakest = min(deviation_codes.items(), key=lambda item: item[1])
    wrong = weakest < least
    words = f"lane {lane} moves by {weakest:.3g} codes (standard deviation)" + (": dead or stuck" if wrong else "")
    return certain("dead lane", subject, weakest, least, wrong, words)


def duplicate_capture(subject: str, sha256: Mapping[str, str], seen: Collection[str]) -> Check:
    """Was one of these lanes delivered before, or twice in this record? Then nothing triggered."""
    again = [lane for lane, digest in sha256.items() if digest in seen]
    again += [lane for lane, digest in sha256.items() if list(sha256.values()).count(digest) > 1 and lane not in again]
    words = f"lanes {', '.join(again)} repeat a record byte for byte" if again else "no lane repeats an earlier record"
    return Check("duplicate capture", subject, float(len(again)), 0.0, BAD if again else OK, words)


def short_record(subject: str, samples: Mapping[str, int], expected: int) -> Check:
    """Has every lane as many samples as were asked for?"""
    lane, fewest = min(samples.items(), key=lambda item: item[1])
    words = f"lane {lane} has {fewest} samples of {expected}"
    return certain("record length", subject, float(fewest), float(expected), fewest != expected, words)
