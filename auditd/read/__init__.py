"""Bytes to records, a file a format, and records to runs.

`read_file` reads one finished file; `reader_for(...).read(Extent)` continues a growing one; `Mapper`
turns what they give into `records.Run` or `records.Refusal`.
"""

from auditd.read.mapping import Mapper
from auditd.read.raw import Extent, Portion, Raw, Reader
from auditd.read.registry import READERS, Readers, read_file, reader_for, storable

__all__ = [
    "READERS",
    "Extent",
    "Mapper",
    "Portion",
    "Raw",
    "Reader",
    "Readers",
    "read_file",
    "reader_for",
    "storable",
]
