"""The shape in which every repair is reported."""

from __future__ import annotations

from typing import Any


def repair_entry(
    kind: str,
    text: str,
    *,
    cylinder: str | None = None,
    end: str | None = None,
    figure: tuple[float | None, str | None, float | None] = (None, None, None),
    applied: bool = True,
) -> dict[str, Any]:
    """One repair of the contract with one sentence of evidence.

    Parameters
    ----------
    kind : as in the contract
    text : the evidence, one sentence
    cylinder, end : what it concerns; None for all
    figure : value, unit and standard uncertainty
    applied : whether results rest on it

    Returns
    -------
    dict

    Examples
    --------
    >>> repair_entry("swapped_ends", "both ends fit exchanged")["evidence"][0]["text"]
    'both ends fit exchanged'
    """
    value, unit, u = figure
    return {
        "kind": kind,
        "cylinder": cylinder,
        "end": end,
        "value": value,
        "unit": unit,
        "u": u,
        "applied": applied,
        "evidence": [{"name": kind, "value": value, "unit": unit, "u": u, "text": text}],
    }
