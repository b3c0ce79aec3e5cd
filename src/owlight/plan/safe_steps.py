"""The way to the safe state as messages: executable without any file, by the run, by `safe` and by the guard."""

from __future__ import annotations

from collections.abc import Mapping

from owlight.bench import Bench, safe_settings
from owlight.driver import Driver, program_message, query, spoken_tolerance
from owlight.driver.conversion import spoken
from owlight.quantity import words
from owlight.vocabulary.plan import SafeStep
from owlight.vocabulary.terms import TERMS
from owlight.vocabulary.values import Setting, Value

_SHOWN = ("condition", "stable")
"""By a register that is asked, or by a read-back that tells where it is and not where it was sent."""


def safe_steps(bench: Bench, drivers: Mapping[str, Driver], resources: Mapping[str, str]) -> tuple[SafeStep, ...]:
    """In the bench's safe order; no step waits for another's success."""
    return tuple(_step(bench, drivers[role], resources[role], setting) for role, setting in safe_settings(bench))


def _step(bench: Bench, driver: Driver, resource: str, setting: Setting) -> SafeStep:
    term = setting.term
    settled = driver.setting[term.name].settled
    return SafeStep(
        role=term.role,
        resource=resource,
        serial_number=bench.role[term.role].serial_number,
        command=program_message(driver, term, setting.value),
        query=query(driver, term),
        expected=spoken_setting(driver, setting),
        tolerance=None if isinstance(setting.value, bool | str) else spoken_tolerance(driver, term, setting.value),
        words=_words(setting) + ("" if settled.by in _SHOWN else "; nothing shows when it has settled"),
        settled_query=settled.query if settled.by == "condition" else "",
        settled_bit=settled.bit,
    )


def spoken_setting(driver: Driver, setting: Setting) -> Value:
    """What the instrument is expected to answer, in its own words: the guard has no driver to translate with.

    A number as it speaks it, False where it speaks 0 or OFF, or its own word for off.
    """
    dialect = driver.setting[setting.term.name]
    text = spoken(dialect, setting.term, setting.value)
    if isinstance(setting.value, bool):
        return text if dialect.words else setting.value
    return float(text.removesuffix(dialect.suffix))


def _words(setting: Setting) -> str:
    if isinstance(setting.value, bool):
        return f"{setting.term} {'on' if setting.value else 'off'}"
    return f"{setting.term} to {words(float(setting.value), TERMS[setting.term].unit)}"
