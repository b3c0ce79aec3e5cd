"""Definite length arbitrary blocks: `#`, one digit, that many digits of length, the bytes."""

from __future__ import annotations


class BlockError(ValueError):
    """The bytes do not begin a definite length block."""


def block_length(header: bytes) -> tuple[int, int] | None:
    """(bytes of header, bytes of data), or None while the header is incomplete.

    IEEE 488.2, 8.7.9 (from memory). An indefinite block (`#0`) ends with END, which a stream socket does not carry:
    it is refused.

    >>> block_length(b"#41024..."), block_length(b"#3"), block_length(b"#10")
    ((6, 1024), None, (3, 0))
    """
    if not header:
        return None
    if header[:1] != b"#":
        raise BlockError(f"a block begins with '#', not with {header[:40]!r}")
    if len(header) < 2:
        return None
    if not header[1:2].isdigit():
        raise BlockError(f"{header[:2]!r} does not say how many digits the length has")
    digits = int(header[1:2])
    if digits == 0:
        raise BlockError("the block has no length (#0); only blocks with a length are read")
    if len(header) < 2 + digits:
        return None
    length = header[2 : 2 + digits]
    if not length.isdigit():
        raise BlockError(f"{length!r} is not the length of a block")
    return 2 + digits, int(length)
