"""What a back end raised, in words; its own text, by which it is found elsewhere, in brackets at the end."""

from __future__ import annotations

_VISA = {
    "VI_ERROR_TMO": "no answer in time",
    "VI_ERROR_RSRC_NFOUND": "nobody answers at this address",
    "VI_ERROR_CONN_LOST": "the connection was lost",
    "VI_ERROR_RSRC_BUSY": "somebody else holds the instrument",
    "VI_ERROR_RSRC_LOCKED": "somebody else has locked the instrument",
}


def in_words(fault: Exception) -> str:
    """
    >>> in_words(ConnectionRefusedError(111, "Connection refused")), in_words(TimeoutError("no answer in time"))
    ('connection refused', 'no answer in time')
    >>> in_words(ValueError("a block\\nof 3 bytes."))
    'a block of 3 bytes (ValueError)'
    """
    said = " ".join(str(fault).split()).rstrip(".")
    if isinstance(fault, ConnectionError | TimeoutError):  # also the back end's with a number, and without
        return fault.strerror.lower() if fault.strerror else said or "the connection failed"
    if "valid attribute for type Resource" in said:  # how the back end says that it knows no such kind of address
        return 'this is no address of an instrument; one is "TCPIP::10.0.0.5::5025::SOCKET"'
    name = getattr(fault, "abbreviation", "")  # of a VISA error
    if name:
        return f"{_VISA.get(name) or getattr(fault, 'description', said).rstrip('.')} ({name})"
    return f"{said} ({type(fault).__name__})" if said else f"it failed without a word ({type(fault).__name__})"
