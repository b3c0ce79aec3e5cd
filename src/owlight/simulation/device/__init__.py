"""A SCPI instrument as seen from inside: syntax, status model, message exchange. Written on its own, on purpose.

Nothing here is shared with the controller side (`owlight.scpi`), so that each can be held against the other.
Clause numbers are those of IEEE Std 488.2-1992 and SCPI-99; where a text was not at hand they are from memory.
"""
