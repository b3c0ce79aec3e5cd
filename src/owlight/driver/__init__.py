"""What an instrument speaks, as a file: messages, queries, units, settling, ranges, the transfer of records."""

from owlight.driver.conversion import program_message, query, spoken, spoken_tolerance, value_of
from owlight.driver.model import Action, Driver, Reading, Record, Scaling, Setting, Settled
from owlight.driver.reading import read_driver

__all__ = [
    "Action",
    "Driver",
    "Reading",
    "Record",
    "Scaling",
    "Setting",
    "Settled",
    "program_message",
    "query",
    "read_driver",
    "spoken",
    "spoken_tolerance",
    "value_of",
]
