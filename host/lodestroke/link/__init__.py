"""The host's end of the link: ports, and the client that speaks over one."""

from .client import Client
from .events import Beat, BoardInfo, Entry, Event, Recorded, Restarted, Sample, Text
from .port import Port
from .ports import find_port, open_port

__all__ = [
    "Beat",
    "BoardInfo",
    "Client",
    "Entry",
    "Event",
    "Port",
    "Recorded",
    "Restarted",
    "Sample",
    "Text",
    "find_port",
    "open_port",
]
