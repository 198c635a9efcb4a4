"""The budget of tagged water: what left the ground, and where it went."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

import numpy as np

from etflux.airmass.inputs import AirInputs
from etflux.airmass.march import ALOFT, BACKGROUND, EMITTED, MIXED, REPLACED, TOP, WIND

HM3_PER_1E6_KG = 1e-3


def unaccounted(ledger: Mapping[str, np.ndarray]) -> np.ndarray:
    """What the terms of the season do not explain of what left the ground, (source,). [10^6 kg]"""
    total = ledger[EMITTED].sum(axis=0)
    gone = sum(ledger[term].sum(axis=0) for term in (WIND, REPLACED, BACKGROUND, TOP) if term in ledger)
    return total - gone - ledger[MIXED][-1] - ledger[ALOFT][-1]


def unaccounted_by_day(ledger: Mapping[str, np.ndarray]) -> np.ndarray:
    """The same day by day, against what was in the air the night before, (day, source). [10^6 kg]"""
    stock = ledger[MIXED] + ledger[ALOFT]
    before = np.concatenate([np.zeros_like(stock[:1]), stock[:-1]])
    gone = sum(ledger[term] for term in (WIND, REPLACED, BACKGROUND, TOP) if term in ledger)
    return before + ledger[EMITTED] - gone - stock


def budget_rows(inputs: AirInputs, ledger: Mapping[str, np.ndarray]) -> list[dict[str, Any]]:
    """Season's budget of every source as rows, in 10^6 m3."""
    if not ledger:
        return []
    rest = unaccounted(ledger)
    rows = []
    for k, source in enumerate(inputs.sources):
        terms = {EMITTED: ledger[EMITTED][:, k].sum(), MIXED: ledger[MIXED][-1, k], ALOFT: ledger[ALOFT][-1, k]}
        terms |= {term: ledger[term][:, k].sum() for term in (WIND, REPLACED, BACKGROUND, TOP) if term in ledger}
        terms["unaccounted"] = rest[k]
        rows += [
            {
                "balance": "tagged water", "subject": source, "term": term, "value": HM3_PER_1E6_KG * float(value),
                "unit": "10⁶ m³",
            }
            for term, value in terms.items()
        ]  # fmt: skip
    return rows
