"""Questions about one stay: its power, and what each capture's demodulation says of itself."""

from __future__ import annotations

import math
from collections.abc import Sequence

from owlight.statistics.checks.finding import BAD, DOUBTFUL, OK, Limits, certain, judged, not_evaluated
from owlight.statistics.intervals import exact_interval
from owlight.statistics.request import BerOfSnrDb
from owlight.vocabulary.captures import Demodulation, Tributary
from owlight.vocabulary.events import Check

BEFORE_AFTER_DB = Limits(doubtful=0.03, bad=0.1)
TIMES_THE_FLOOR = Limits(doubtful=10.0, bad=10.0, low_is_bad=True)
PATTERN_MARGIN_DB = Limits(doubtful=6.0, bad=3.0, low_is_bad=True)
ALIKE_FACTOR = Limits(doubtful=3.0, bad=10.0)
OFF_PLAN_SYMBOLS = 16.0
"""An equaliser delays its outputs by some symbols against each other; planned offsets lie hundreds apart."""
SNR_FACTOR = Limits(doubtful=2.0, bad=5.0)
WRONG_LOCK_FRACTIONS = (0.5, 0.375, 0.25, 0.125)
_FEW_ERRORS = 20


def power_before_and_after(
    subject: str, before_w: float | None, after_w: float | None, limits: Limits = BEFORE_AFTER_DB
) -> Check:
    """Did the tap read the same before and after the captures?"""
    name = "power before and after"
    if before_w is None or after_w is None or before_w <= 0.0 or after_w <= 0.0:
        return not_evaluated(name, subject, "the tap was not read on both sides of the captures")
    change_db = 10.0 * math.log10(after_w / before_w)
    return judged(name, subject, abs(change_db), limits, f"the tap changed by {change_db:+.3f} dB during the captures")


def meter_floor(subject: str, tap_w: float | None, floor_w: float, limits: Limits = TIMES_THE_FLOOR) -> Check:
    """Is the reading well above what the meter shows in the dark?"""
    if tap_w is None:
        return not_evaluated("meter floor", subject, "the tap was not read")
    ratio = tap_w / floor_w
    return judged("meter floor", subject, ratio, limits, f"the tap reads {ratio:.1f} times the meter's floor")


def demodulation(
    found: Demodulation,
    ber_of_snr_db: BerOfSnrDb | None = None,
    beat_window_hz: tuple[float, float] | None = None,
) -> tuple[Check, ...]:
    """All questions that one demodulation can answer; SNR and beat frequency only when given what to compare with."""
    subject = f"capture {found.capture.point}/{found.capture.attempt}/{found.capture.number}"
    if found.status != "locked":
        return (Check("lock", subject, None, None, DOUBTFUL, f"no lock, so no BER: {found.reason}"),)
    checks = [
        pattern_margin(subject, figure(found, "sync_peak"), figure(found, "sync_second")),
        lane_map(subject, found),
        wrong_lock(subject, found.tributaries),
        tributaries_alike(subject, found.tributaries),
    ]
    if ber_of_snr_db is not None:
        checks.append(snr_against_ber(subject, found, ber_of_snr_db))
    if beat_window_hz is not None:
        checks.append(beat_frequency(subject, figure(found, "frequency_offset_hz"), beat_window_hz))
    return tuple(checks)


def figure(found: Demodulation, name: str) -> float | None:
    """A figure by its name, from whichever stage gives it last."""
    values = [stage.figures[name] for stage in found.stages if name in stage.figures]
    return values[-1] if values else None


def pattern_margin(subject: str, peak: float | None, second: float | None, limits: Limits = PATTERN_MARGIN_DB) -> Check:
    """How far the correlation's peak stands above the next best alignment, 20 log10."""
    if peak is None or second is None or peak <= 0.0:
        return not_evaluated("pattern margin", subject, "the synchronisation gave no peak and second peak")
    margin_db = 20.0 * math.log10(peak / max(second, 1e-12))
    return judged("pattern margin", subject, margin_db, limits, f"the pattern stands {margin_db:.1f} dB above the next")


def lane_map(subject: str, found: Demodulation, limit_symbols: float = OFF_PLAN_SYMBOLS) -> Check:
    """Do the tributaries' delays differ as planned, and does every lane carry what the bench says it does?"""
    off_plan = figure(found, "off_plan_symbols")
    if off_plan is None:
        return not_evaluated("lane map", subject, "no offsets between the tributaries were planned")
    words = found.reason or f"the tributaries' delays are as planned within {off_plan:.0f} symbols"
    finding = BAD if off_plan > limit_symbols else DOUBTFUL if found.reason else OK
    return Check("lane map", subject, off_plan, limit_symbols, finding, words)


def wrong_lock(subject: str, tributaries: Sequence[Tributary]) -> Check:
    """Is a tributary's ratio what a wrong lane or pattern gives: a half, or an eighth multiple of it?

    1/2 needs one tributary without its pattern; 3/8, 1/4, 1/8 are averages over tributaries of which some have none.
    """
    name = "wrong lock"
    counted = [(t.name, t.errors, t.bits) for t in tributaries if t.bits]
    if not counted:
        return not_evaluated(name, subject, "nothing was counted")
    # every noise above a BER of 1/3 is lost anyway: a tributary there, whatever its interval, is no measurement
    lane, errors, bits = max(counted, key=lambda entry: entry[1] / entry[2])
    worst = errors / bits
    if worst > 1.0 / 3.0:
        return certain(
            name, subject, worst, 1.0 / 3.0, True, f"tributary {lane} has a BER of {worst:.3f}: no pattern there"
        )
    total_errors, total_bits = sum(e for _, e, _ in counted), sum(n for _, _, n in counted)
    low, high = exact_interval(total_errors, total_bits)
    # noise alone can give 1/8; as a sign of a wrong lock it needs a tributary that is far worse than that
    suspects = [fraction for fraction in WRONG_LOCK_FRACTIONS if fraction >= 0.25 or worst >= 2.0 * fraction]
    hit = next((fraction for fraction in suspects if low <= fraction <= high), None)
    ratio = total_errors / total_bits
    if hit is None:
        return certain(name, subject, ratio, 1.0 / 3.0, False, f"the BER of {ratio:.3g} is no fraction of a wrong lock")
    return certain(name, subject, ratio, hit, True, f"the BER of {ratio:.3f} is what a wrong lock gives ({hit:g})")


def tributaries_alike(subject: str, tributaries: Sequence[Tributary], limits: Limits = ALIKE_FACTOR) -> Check:
    """Does the pooled BER hide a lane much worse than the rest? Only what counts cannot explain is held against it."""
    name = "tributaries alike"
    counted = [t for t in tributaries if t.bits]
    if len(counted) < 2 or max(t.errors for t in counted) < _FEW_ERRORS:
        return not_evaluated(name, subject, "too few errors to compare tributaries")
    worst = max(counted, key=lambda t: t.errors / t.bits)
    best = min(counted, key=lambda t: t.errors / t.bits)
    # the least ratio that the two intervals allow, so that a few errors alone raise no alarm
    least = exact_interval(worst.errors, worst.bits)[0] / exact_interval(best.errors, best.bits)[1]
    ratio = max(least, 1.0)
    words = f"{worst.name} has {worst.errors} errors and {best.name} {best.errors}: at least {ratio:.2g} times as many"
    return judged(name, subject, ratio, limits, words)


def snr_against_ber(subject: str, found: Demodulation, ber_of_snr_db: BerOfSnrDb, limits: Limits = SNR_FACTOR) -> Check:
    """Does the BER that each tributary's measured SNR predicts agree with the counted one?"""
    name = "SNR against BER"
    known = [t for t in found.tributaries if t.snr_db is not None and t.bits]
    bits = sum(t.bits for t in known)
    errors = sum(t.errors for t in known)
    if not known or errors < _FEW_ERRORS:
        return not_evaluated(name, subject, "too few errors, or no SNR, to compare")
    expected = sum(t.bits * float(ber_of_snr_db(t.snr_db or 0.0)) for t in known) / bits
    ratio = errors / bits / max(expected, 1e-300)
    words = f"counted BER {errors / bits:.3g}, predicted from the SNR {expected:.3g}"
    return judged(name, subject, max(ratio, 1.0 / ratio), limits, words)


def beat_frequency(subject: str, offset_hz: float | None, window_hz: tuple[float, float]) -> Check:
    """Does the beat of signal and local oscillator lie where both lasers were set?"""
    name = "beat frequency"
    if offset_hz is None:
        return not_evaluated(name, subject, "the demodulation gave no frequency offset")
    low, high = window_hz
    outside_hz = max(low - offset_hz, offset_hz - high, 0.0)
    words = f"beat at {offset_hz / 1e6:+.1f} MHz, expected {low / 1e6:+.1f} to {high / 1e6:+.1f} MHz"
    return Check(name, subject, offset_hz, high if offset_hz > 0 else low, DOUBTFUL if outside_hz else OK, words)
