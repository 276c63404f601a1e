"""From quantities with intervals to findings: probability, size, sentence, caution."""

from pvcard.findings.basic import findings_of

__all__ = ["findings_of"]
