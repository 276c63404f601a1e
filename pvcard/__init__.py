"""pvcard: measured cylinder pressure of reciprocating compressors, turned into decisions."""

__version__ = "0.1.0"
