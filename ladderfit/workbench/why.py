"""Plain sentences: why the answer moved, what the numbers are, how far to trust them."""

from __future__ import annotations

from ladderfit.anchors import anchor_weights
from ladderfit.diagnostics import TRUSTED_K
from ladderfit.ladder import Ladder
from ladderfit.ladder_file import as_written
from ladderfit.names import base_name, parameter
from ladderfit.result import Result
from ladderfit.rounding import MINUS, to_place
from ladderfit.sampling.run import UNINFORMED

NUMBERS = ("slope", "zero_point", "peak_magnitude", "hubble_constant")
SHORT = {
    "slope": "slope",
    "zero_point": "zero point",
    "peak_magnitude": "peak magnitude",
    "hubble_constant": "Hubble constant",
}
TABLES = {
    "cepheids": "Cepheids",
    "anchors.parallaxes": "parallax stars",
    "supernovae": "supernovae in hosts",
    "expansion": "objects in the expansion",
}
_SCALE = ("zero_point", "peak_magnitude", "hubble_constant")
_WORTH_SAYING = 0.05  # of an error, and of an anchor's weight


def in_errors(after: Result, before: Result, name: str) -> float | None:
    """Change of a parameter in units of its error before; None where it has none."""
    if name not in after.draws or name not in before.draws or before.sd(name) == 0.0:
        return None
    return (after.mean(name) - before.mean(name)) / before.sd(name)


def signed(value: float) -> str:
    """One decimal with a real sign: ``+0.8``, ``−0.8``, ``0.0``."""
    text = to_place(value, -1)
    return text if text.startswith(MINUS) or float(text) == 0.0 else f"+{text}"


def why(before: Result, after: Result) -> str:
    """One sentence: which number moved most, and on account of what."""
    return f"{_moved(before, after)}: {_reason(before, after)}."


def _moved(before: Result, after: Result) -> str:
    moves = {name: in_errors(after, before, name) for name in NUMBERS}
    known = {name: move for name, move in moves.items() if move is not None}
    if not known:
        return "New numbers"
    named = ("zero_point", max(known, key=lambda name: abs(known[name])))
    told = {name: known[name] for name in named if abs(known.get(name, 0.0)) >= _WORTH_SAYING}
    if not told:
        text = "No headline number moved by 0.05 of its error"
    else:
        text = ", ".join(
            f"{SHORT[name]} {signed(move)} of its error" for name, move in told.items()
        )
    wider = {name: after.sd(name) / before.sd(name) for name in known}
    name = max(wider, key=lambda name: abs(wider[name] - 1.0))
    if abs(wider[name] - 1.0) > 0.15:
        whose = "its error" if list(told) == [name] else f"error of the {SHORT[name]}"
        text += f", {whose} × {wider[name]:.2g}"
    return text[0].upper() + text[1:]


def _reason(before: Result, after: Result) -> str:
    gone, others = _weights(before, after)
    parts = [*gone, *_rows(before.ladder, after.ladder), *others]
    if not parts:
        parts = [
            f"{key} {as_written(old)} to {as_written(new)}"
            for key, (old, new) in after.choices.difference(before.choices).items()
        ]
    return "; ".join(parts[:2]) or "the same choices, drawn again"


def _weights(before: Result, after: Result) -> tuple[list[str], list[str]]:
    """Anchors that came or went; others whose weight in the zero point changed, largest first."""
    first, second = anchor_weights(before), anchor_weights(after)
    if first is None or second is None:
        return [], []
    old, new = first.by_name(), second.by_name()
    changes = {name: (old.get(name, 0.0), new.get(name, 0.0)) for name in {**old, **new}}
    gone = {name for name in changes if (name in old) != (name in new)}
    told = sorted(changes.items(), key=lambda entry: -abs(entry[1][1] - entry[1][0]))
    words = {
        name: f"{_possessive(name)} weight {_share(old)} to {_share(new)}"
        for name, (old, new) in told
        if name in gone or abs(new - old) >= _WORTH_SAYING
    }
    return (
        [text for name, text in words.items() if name in gone],
        [text for name, text in words.items() if name not in gone],
    )


def _possessive(name: str) -> str:
    return f"{name}'" if name.endswith("s") else f"{name}'s"


def _share(weight: float) -> str:
    percent = round(100.0 * weight)
    return "0" if percent <= 0 else f"{percent} %"


def _rows(before: Ladder, after: Ladder) -> list[str]:
    """Tables of which other rows take part."""
    told = []
    for section, words in TABLES.items():
        old, new = before.kept.get(section), after.kept.get(section)
        if old is not None and new is not None and old.kept != new.kept:
            told.append(f"{new.kept:,} {words} instead of {old.kept:,}")
    return told


def trust(result: Result) -> tuple[bool, str]:
    """Whether to trust the draws, and one sentence from their diagnostics."""
    found = result.diagnostics
    if found.pareto_k is not None and found.pareto_k > TRUSTED_K:
        return False, (
            f"Do not trust these numbers: Pareto k = {found.pareto_k:.2f}, above {TRUSTED_K}; "
            "narrow the priors that leave it so wide."
        )
    leaning = prior_driven(result)
    if leaning:
        return False, leaning
    ess = min((value for value in found.ess.values() if value == value), default=float("nan"))
    text = f"Trustworthy: {ess:,.0f} effective draws"
    if found.pareto_k is not None:
        text += f", Pareto k = {to_place(found.pareto_k, -2)}"
    own = [note for note in found.notes if result.source is None or note not in result.source.notes]
    return not own, f"{text}. {own[0]}" if own else f"{text}."


def prior_driven(result: Result) -> str:
    """The library's note that a prior alone sets the scale, or nothing."""
    for name, ratio in result.diagnostics.informed.items():
        if base_name(name) in _SCALE and ratio**2 > UNINFORMED:
            words = f"The data add nothing to the prior of the {parameter(name).words}"
            return f"{words} {result.choices.prior(name)}."
    return ""
