"""From exports to recordings: one reader for each kind of file."""

from pvcard.ingest.columns_file import ColumnMap, read_columns
from pvcard.ingest.front import read_export
from pvcard.ingest.recording import Channel, Evidence, LineReadings, Recording, Trace

__all__ = [
    "Channel",
    "ColumnMap",
    "Evidence",
    "LineReadings",
    "Recording",
    "Trace",
    "read_columns",
    "read_export",
]
