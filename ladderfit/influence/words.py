"""Leave-one-out in sentences."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import Any

import numpy as np
import pandas as pd

from ladderfit.influence.reweighting import NOT_TRUSTED, REFITTED, UNDETERMINED
from ladderfit.influence.sets import HOST
from ladderfit.names import parameter
from ladderfit.rounding import last_place, to_place

CARRIES = 1.0  # of the calibration's error: an object that moves a number by more carries it


def sentences(
    table: pd.DataFrame, targets: Sequence[str], errors: Mapping[str, float]
) -> list[str]:
    """What moves what the most, what cannot be spared, and what not to trust."""
    found = []
    for name in targets:
        if errors[name] <= 0.0:
            continue
        for hosts in (False, True):
            some = table[(table["kind"] == HOST) == hosts]
            some = some[np.isfinite(some[name])]
            if len(some):
                found.append(_largest(some, name, errors[name]))
    for _, row in table[table["how"] == UNDETERMINED].iterrows():
        found.append(f"Without the {row['kind']} {row['name']} the distance scale is undetermined.")
    refits = int(np.sum(table["how"] == REFITTED))
    if refits:
        found.append(
            f"For {refits} of {len(table):,} objects the weights are too heavy (Pareto k above "
            "0.7); the fit was drawn anew without each of them."
        )
    bad = int(np.sum(table["how"] == NOT_TRUSTED))
    if bad:
        found.append(
            f"For {bad} of {len(table):,} objects the weights are too heavy to trust (Pareto k "
            "above 0.7): set them aside and draw anew before relying on their shifts."
        )
    return found


def _largest(table: pd.DataFrame, name: str, error: float) -> str:
    row = table.iloc[int(np.argmax(table[name].abs().to_numpy()))]
    known = parameter(name)
    size = to_place(float(row[name]), last_place(error) - 1)
    signed = size if row[name] < 0 else f"+{size}"
    unit = f" {known.unit}" if known.unit else ""
    part = abs(float(row[name])) / error
    whole = row["kind"] == HOST
    among = f"{len(table):,} {'hosts' if whole else 'single objects'}"
    called = row["name"] if whole else f"{row['name']} ({_where(row)})"
    text = (
        f"Of {among}, {called} moves the {known.words} most when left out: "
        f"by {signed}{unit}, {part:.2f} of its error."
    )
    carried = int(np.sum(table[name].abs() > CARRIES * error))
    if carried > 1:
        text += f" {carried} of them move it by more than its error."
    return text


def _where(row: pd.Series[Any]) -> str:
    return f"{row['kind']} in {row['host']}" if row["host"] else str(row["kind"])
