"""A process of its own that makes the bench safe when the runner dies, hangs or outlives its time. No interlock."""

from owlight.guard.guard import Guard

__all__ = ["Guard"]
