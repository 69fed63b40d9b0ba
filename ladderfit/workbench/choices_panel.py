"""The open rung's choices, at most seven, and which rows take part."""

from __future__ import annotations

import html
import math
from collections.abc import Callable, Iterator
from typing import Any

import ipywidgets as widgets
import numpy as np

from ladderfit import schema
from ladderfit.choices import Choices
from ladderfit.ladder import Ladder
from ladderfit.priors import HalfNormal, LogNormal, Normal, Prior
from ladderfit.workbench.aside import entries, in_list, with_chosen
from ladderfit.workbench.controls import (
    Asked,
    Changes,
    Control,
    menu,
    number,
    several,
    span,
    switch,
)
from ladderfit.workbench.parallax_controls import parallax_controls
from ladderfit.workbench.rungs import WORDS, rungs_present

MOST = 7
_SECTIONS = {
    "anchors": ("anchors.parallaxes",),
    "cepheids": ("cepheids",),
    "supernovae": ("supernovae",),
    "expansion": ("expansion",),
}
_ROWS = {
    "cepheids": "stars",
    "anchors.parallaxes": "parallax stars",
    "supernovae": "supernovae",
    "expansion": "objects",
}
_DISTANCE_PRIORS = [(words, words) for words in ("flat in modulus", "uniform in volume")]
_OVERTONES = [("drop", "drop"), ("offset of their own", "offset"), ("convert periods", "convert")]
_MOST_SWITCHES = 3
_BREAKS = (5.0, 10.0, 15.0, 20.0, 30.0)


class ChoicesPanel:
    """Controls of every rung, of which those of the open one are shown.

    Parameters
    ----------
    ladder : Ladder
        What there is to choose.
    every : Ladder
        The same with nothing cut, for the ends of sliders.
    asked : callable
        Called when a control asks for a change.
    """

    def __init__(self, ladder: Ladder, every: Ladder, asked: Asked) -> None:
        self.rungs = rungs_present(ladder)
        self._kept = {key: widgets.HTML() for key in self.rungs}
        self.controls = {key: list(_controls(key, ladder, every))[:MOST] for key in self.rungs}
        self._boxes = {key: self._box(key) for key in self.rungs}
        for control in self.all_controls():
            control.when_asked(asked)
        self.widget = widgets.VBox(
            list(self._boxes.values()),
            layout=widgets.Layout(width="330px", flex="0 0 auto", height="504px", overflow="auto"),
        )
        self.widget.add_class("lf-choices")
        self.show(ladder)

    def all_controls(self) -> Iterator[Control]:
        """Every control of every rung."""
        for controls in self.controls.values():
            for control in controls:
                yield from control.all()

    def open(self, key: str) -> None:
        """Show one rung's choices."""
        for rung, box in self._boxes.items():
            box.layout.display = "" if rung == key else "none"

    def show(self, ladder: Ladder, besides: Control | None = None) -> None:
        """Take values and counts from a ladder; `besides` is under the hand and left alone."""
        for control in self.all_controls():
            if control is besides:
                control._choices = ladder.choices
            else:
                control.show(ladder.choices)
        self.count(ladder)

    def count(self, ladder: Ladder) -> None:
        """Say how many rows take part, and why the others do not."""
        for key, line in self._kept.items():
            lines = []
            for section in _SECTIONS[key]:
                kept = ladder.kept.get(section)
                if kept is not None:
                    text = f"{kept.kept:,} of {kept.total:,} {_ROWS[section]} kept"
                    reasons = "; ".join(f"{n:,} {why}" for why, n in kept.reasons.items())
                    lines.append(
                        f"<b>{text}</b>" + (f" ({html.escape(reasons)})" if reasons else "")
                    )
            line.value = "<br>".join(lines)

    def quiet(self) -> None:
        """Take back every message."""
        for control in self.all_controls():
            if control.message.value:
                control.say("")

    def _box(self, key: str) -> Any:
        heading = widgets.HTML(f'<h3 class="lf-heading">{WORDS[key]}</h3>')
        kept = self._kept[key]
        kept.add_class("lf-kept")
        kept.layout.width = "306px"
        controls = [control.box for control in self.controls[key]]
        return widgets.VBox(
            [heading, kept, *controls], layout=widgets.Layout(flex="0 0 auto", display="none")
        )


def _controls(key: str, ladder: Ladder, every: Ladder) -> Iterator[Control]:
    makers = {
        "anchors": _of_anchors,
        "cepheids": _of_cepheids,
        "supernovae": _of_supernovae,
        "expansion": _of_expansion,
    }
    for control in makers[key](ladder, every):
        yield control if key == "anchors" else control.only_where(_section(key, ladder.choices))


def _section(key: str, choices: Choices) -> Callable[[Choices], bool]:
    """Whether choices have the section that a rung's controls read; it may be taken out."""
    if key == "cepheids" and choices.cepheids is None:
        return _has_parallaxes
    return lambda now: getattr(now, key) is not None


def _has_parallaxes(choices: Choices) -> bool:
    return choices.anchors.parallaxes is not None


def _of_anchors(ladder: Ladder, every: Ladder) -> Iterator[Control]:
    anchors = ladder.choices.anchors
    names = list(anchors.geometric)
    if len(names) <= _MOST_SWITCHES:
        for name in names:
            known = anchors.geometric[name]
            words = f"{name}, modulus {known.modulus:g} ± {known.error:g} mag"
            yield switch(words, _use(name), _reads_use(name))
    else:
        yield several(
            "Geometric, in use",
            names,
            lambda c: tuple(n for n, anchor in c.anchors.geometric.items() if anchor.use),
            lambda chosen, _: {_use(name): name in chosen for name in names},
        )
    for control in parallax_controls(ladder):
        yield control.only_where(_has_parallaxes)


def _use(name: str) -> str:
    return schema.join(schema.join("anchors.geometric", name), "use")


def _reads_use(name: str) -> Any:
    return lambda choices: choices.anchors.geometric[name].use


def _width(choices: Choices, name: str, words: str, ends: tuple[float, float]) -> Iterator[Control]:
    """The width of a parameter's prior, where its family has one number for it."""
    if not isinstance(choices.prior(name), Normal | HalfNormal):
        return
    key = schema.join("priors", name)

    def read(choices: Choices) -> float:
        prior = choices.prior(name)
        return float(prior.scale if isinstance(prior, HalfNormal) else prior.sd)

    def write(value: float, choices: Choices) -> Changes:
        prior: Prior = choices.prior(name)
        if isinstance(prior, HalfNormal):
            return {key: {"half_normal": value}}
        return {key: {"normal": [prior.centre, value]}}

    yield number(words, ends, read, write, unit="mag", log=True)


def _period_ends(every: Ladder) -> tuple[float, float]:
    samples = [s for s in (every.cepheids, every.parallax_stars) if s is not None]
    periods = 10.0 ** np.concatenate([sample.log_period for sample in samples])
    return _round(float(periods.min()), math.floor), _round(float(periods.max()), math.ceil)


def _including(ends: tuple[float, float], bounds: tuple[float, float]) -> tuple[float, float]:
    """Ends of a slider that reach the bounds chosen, where these are finite and above zero."""
    low, high = bounds
    return min(ends[0], low) if low > 0.0 else ends[0], max(
        ends[1], high
    ) if high < math.inf else ends[1]


def _round(value: float, towards: Any) -> float:
    """Two digits, outwards."""
    step = 10.0 ** (math.floor(math.log10(value)) - 1)
    return float(f"{towards(value / step) * step:.6g}")


def _of_cepheids(ladder: Ladder, every: Ladder) -> Iterator[Control]:
    choices = ladder.choices
    base = "cepheids" if choices.cepheids is not None else "anchors.parallaxes"

    def section(now: Choices) -> Any:
        return now.cepheids if base == "cepheids" else now.anchors.parallaxes

    ends = _including(_period_ends(every), section(choices).periods)
    yield span("Periods", f"{base}.periods", ends, lambda c: section(c).periods, unit="d")
    if "mode" in section(choices).columns:
        yield menu(
            "Overtone pulsators",
            _OVERTONES,
            lambda c: section(c).overtones,
            lambda value, _: {f"{base}.overtones": value},
        )
    yield from _ratio(choices)
    yield from _terms(choices)
    if base == "cepheids":
        yield menu(
            "Prior of host distances",
            _DISTANCE_PRIORS,
            lambda c: c.hosts.distance_prior,
            lambda value, _: {"hosts.distance_prior": value},
        )


def _ratio(choices: Choices) -> Iterator[Control]:
    """The ratio of the Wesenheit index, the same for every sample that has one."""
    keys = []
    if choices.cepheids is not None and choices.cepheids.magnitude.wesenheit is not None:
        keys.append("cepheids.magnitude.wesenheit.ratio")
    stars = choices.anchors.parallaxes
    if stars is not None and stars.magnitude is not None and stars.magnitude.wesenheit is not None:
        keys.append("anchors.parallaxes.magnitude.wesenheit.ratio")
    if not keys:
        return
    start = float(choices.value(keys[0]))
    yield number(
        "Ratio of absorption to reddening",
        (0.7 * start, 1.3 * start) if start > 0.0 else (0.0, 1.0),
        lambda c: float(c.value(keys[0])),
        lambda value, _: dict.fromkeys(keys, value),
    )


def _terms(choices: Choices) -> Iterator[Control]:
    known = choices.relation.metallicity
    if known != "none":
        mapping = schema.written(known)
        yield menu(
            "Metallicity term",
            [("fitted", True), ("none", False)],
            lambda c: c.relation.metallicity != "none",
            lambda value, _: {"relation.metallicity": mapping if value else "none"},
        )
    own = choices.relation.break_
    periods = sorted({*_BREAKS, *([] if own == "none" else [own])})
    yield menu(
        "Break of the slope",
        [("none", "none"), *((f"at {period:g} d", period) for period in periods)],
        lambda c: c.relation.break_,
        lambda value, _: {"relation.break": value},
    )
    yield menu(
        "Curvature",
        [("none", False), ("fitted", True)],
        lambda c: c.relation.curvature,
        lambda value, _: {"relation.curvature": value},
    )


def _of_supernovae(ladder: Ladder, every: Ladder) -> Iterator[Control]:
    choices = ladder.choices
    yield from _width(choices, "peak_scatter", "Prior width, scatter", (0.01, 1.0))
    yield from _width(choices, "peak_magnitude", "Prior width, peak magnitude", (0.02, 5.0))
    if every.peaks is not None:
        yield _set_aside("supernovae", sorted({*map(str, every.peaks.name)}), choices)


def _set_aside(section: str, names: list[str], choices: Choices) -> Control:
    """Objects and whole hosts to be set aside; other entries of the file are left as they are."""
    hosts = dict.fromkeys(e.host for e in entries(choices, section) if e.whole_host and e.host)
    options = [(name, ("name", name)) for name in names]
    options += [(f"all of {host}", ("host", host)) for host in hosts]
    offered = [one for _, one in options]
    return several(
        "Set aside (Ctrl + click)",
        options,
        lambda c: in_list(c, section, offered),
        lambda chosen, c: with_chosen(c, section, offered, chosen),
    )


def _of_expansion(ladder: Ladder, every: Ladder) -> Iterator[Control]:
    expansion = ladder.choices.expansion
    if expansion is not None and every.flow is not None:
        redshift = every.flow.redshift
        ends = _round(float(redshift.min()), math.floor), _round(float(redshift.max()), math.ceil)
        ends = _including(ends, expansion.redshifts)
        yield span("Redshifts", "expansion.redshifts", ends, _redshifts)
        yield _plain("Dispersion of velocities", "peculiar_velocity", (0.0, 600.0), "km/s")
    if expansion is not None and not expansion.linear and expansion.intercept is None:
        yield _plain("Deceleration q0", "q0", (-1.5, 0.5), "")
        yield _plain("Jerk j0", "j0", (-1.0, 3.0), "")
    if expansion is not None and expansion.linear:
        yield menu(
            "Velocity at zero distance",
            [("zero", False), ("fitted", True)],
            lambda c: c.expansion.velocity_constant if c.expansion else False,
            lambda value, _: {"expansion.velocity_constant": value},
        )
    yield from _hubble_prior(ladder.choices)


def _redshifts(choices: Choices) -> tuple[float, float]:
    return choices.expansion.redshifts if choices.expansion else (0.0, 1.0)


def _plain(words: str, field: str, ends: tuple[float, float], unit: str) -> Control:
    return number(
        words,
        ends,
        lambda c: float(getattr(c.expansion, field)),
        lambda value, _: {f"expansion.{field}": value},
        unit=unit,
    )


def _hubble_prior(choices: Choices) -> Iterator[Control]:
    """The prior of the Hubble constant: the stated one, or none."""
    stated = choices.priors.get("hubble_constant")
    if not isinstance(stated, LogNormal):
        return
    key = "priors.hubble_constant"
    yield menu(
        "Prior of H0",
        [(f"{stated.median:g}, {stated.deviation:g} mag", True), ("none stated", False)],
        lambda c: key.partition(".")[2] in c.priors,
        lambda value, _: {key: stated.written() if value else None},
    )
