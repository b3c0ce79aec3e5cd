"""Loops that numpy cannot express, compiled once per installation; the only place that knows numba."""

from owlight import shipped

shipped.numba_cache()
