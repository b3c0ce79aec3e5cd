"""What every test shares: inputs drawn by hypothesis are the same in every run, and a busy machine fails nothing."""

from __future__ import annotations

from hypothesis import settings

# a first compilation or a loaded machine takes longer than any deadline that would be worth having
settings.register_profile("owlight", deadline=None, derandomize=True)
settings.load_profile("owlight")
