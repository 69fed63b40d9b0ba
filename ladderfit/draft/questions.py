"""What a draft left open, as questions with their answers; knows no page."""

from __future__ import annotations

import re
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass, replace
from pathlib import Path
from typing import Any

import numpy as np

from ladderfit.draft.answers import Change, Place
from ladderfit.draft.asking import TERMS, column_question, matters
from ladderfit.draft.clues import spread_of
from ladderfit.draft.entries import anchor_entries, hosts_of
from ladderfit.draft.facts import Facts
from ladderfit.draft.jobs import GEOMETRIC, Sketch
from ladderfit.draft.magnitudes import recipes
from ladderfit.draft.make import Draft
from ladderfit.draft.roles import Choice
from ladderfit.draft.text import Entry
from ladderfit.inputs.table_files import read_table
from ladderfit.schema import UNDECIDED

NUMBER, INDEX, ANY = "a number", "an index such as H - 0.386 (V - I)", "a value"
_NONE = "no metallicity term"
_TEXTS = ("star", "name", "host", "mode", "system", "survey")  # roles of columns of text
_SCALES = ("[Fe/H]", "[O/H]", "[M/H]", "12+log(O/H)")


@dataclass(frozen=True)
class Option:
    """An answer: its words, and what it writes."""

    words: str
    changes: tuple[Change, ...]


@dataclass(frozen=True)
class Question:
    """Something a draft left open.

    Attributes
    ----------
    place : tuple of str
        Path of the key in the ladder file; comments stand behind it.
    words : str
        The question.
    saw : str
        What the draft saw, and why it did not decide.
    matters : str
        Why the answer matters; may be empty.
    options : tuple of Option
    others : tuple of Option
        Less likely ones.
    typed : str
        What else may be typed (`NUMBER`, `INDEX`, `ANY`); "" for nothing.
    unit : str
        Of a typed number.
    asks : tuple of path
        All keys that an answer settles.
    """

    place: Place
    words: str
    saw: str
    matters: str = ""
    options: tuple[Option, ...] = ()
    others: tuple[Option, ...] = ()
    typed: str = ""
    unit: str = ""
    asks: tuple[Place, ...] = ()

    @property
    def places(self) -> tuple[Place, ...]:
        """The keys that it is about."""
        return self.asks or (self.place,)


def questions_of(draft: Draft) -> list[Question]:
    """A question for each undecided entry; a galaxy's modulus and error are asked together."""
    found: list[Question] = []
    pairs = set()
    for entry in draft.undecided:
        if (entry.section, entry.key) in pairs:
            continue
        if _job(entry) == GEOMETRIC and entry.section != ("anchors",):
            question = _anchor(entry, draft)
            pairs |= {(place[:-1], place[-1]) for place in question.places}
        else:
            question = _question(entry, draft)
        found.append(question)
    return found


def unknown(place: Place, text: str) -> Question:
    """A question for an open key that no draft of these tables explains."""
    if place[:2] == ("anchors", "geometric") and place[3:] in (("modulus",), ("error",)):
        return _number_of(place, re.findall(r"(-?[\d.]+) \(", text), _sentence(text))
    key = ".".join(place)
    return Question(place, f"What is {key}?", _sentence(text), matters(place[-1]), typed=ANY)


def _question(entry: Entry, draft: Draft) -> Question:
    place, text = (*entry.section, entry.key), _text(entry.choice)
    base = Question(place, f"What is {entry.dotted}?", _sentence(text), matters(entry.key))
    job = _job(entry)
    if entry.section[-1:] == ("columns",) and job in draft.sources:
        return _column(entry, base, *draft.sources[job])
    if place == ("anchors", "geometric"):
        return _anchors(base, entry, draft)
    if "magnitude" in entry.section and job in draft.sources:
        return _light(entry, base, *draft.sources[job])
    if entry.key == "corrected":
        words = "Is a zero-point recipe applied to the parallaxes already?"
        options = (_set("yes, it is applied", place, True), _set("no, apply one", place, False))
        return replace(base, words=words, saw="No table tells.", options=options)
    if entry.section == ("relation", "metallicity"):
        return _metallicity(entry, base, draft)
    if entry.section == ("peak_relation",):
        return _term(entry, base)
    return replace(base, typed=ANY)


# --- columns -----------------------------------------------------------------------------


def _column(entry: Entry, base: Question, path: Path, sketch: Sketch) -> Question:
    columns, offers = sketch.roles.by_name, entry.choice.offers
    optional = "take this line out" in str(entry.choice.value)
    text = _text(entry.choice)
    if len(offers) > 1:
        saw = f"{_listed(offers)} fit about equally well by name, unit and values."
    else:
        saw = _sentence(text)
    light = sketch.photometry.told if sketch.photometry else {}
    taken = {str(c.value) for c in (*sketch.columns.values(), *light.values())}
    likely = offers or [n for n, c in columns.items() if c.error and n not in taken][:5]
    options = [_take(base.place, columns[name]) for name in likely]
    if optional:
        options.append(Option("none: leave it out", ((base.place, None),)))
    text_too = entry.key in _TEXTS
    rest = [
        _take(base.place, column)
        for name, column in columns.items()
        if name not in likely and (text_too or column.numbers is not None)
    ]
    return replace(
        base,
        words=column_question(entry.key, path.name),
        saw=saw,
        options=tuple(options),
        others=tuple(rest),
    )


def _take(place: Place, column: Facts) -> Option:
    return Option(f"{column.name}: {_holds(column)}", ((place, column.name),))


def _holds(column: Facts) -> str:
    """What a column holds, in a few words."""
    if column.numbers is not None:
        unit = "" if column.unit is None else f" {column.unit}"
        return f"{spread_of(column.numbers)}{unit}"
    shown = ", ".join(_cut(label) for label in column.labels[:3])
    return f"{shown}, ..." if len(column.labels) > 3 else shown


def _cut(label: str) -> str:
    return label if len(label) <= 20 else f"{label[:19]}\u2026"


# --- magnitudes --------------------------------------------------------------------------


def _light(entry: Entry, base: Question, path: Path, sketch: Sketch) -> Question:
    columns = sketch.roles.by_name
    if entry.key == "ratio":
        return _ratio(base, sketch)
    if entry.key == "band" and entry.choice.offers:
        options = [_set(name, base.place, name) for name in entry.choice.offers]
        words = f"Which magnitude of {path.name} enters the relation?"
        saw = f"{path.name} has {_listed(entry.choice.offers)}."
        typed = INDEX if len(options) > 1 else ""
        return replace(base, words=words, saw=saw, options=tuple(options), typed=typed)
    what = "errors" if entry.section[-1] == "errors" else "magnitudes"
    of = "" if entry.key in ("total", "H") and not entry.choice.offers else f" in {entry.key}"
    likely = [name for name in entry.choice.offers if name in columns]
    numbers = [n for n, c in columns.items() if n not in likely and c.numbers is not None]
    rest = [_take(base.place, columns[name]) for name in numbers]
    return replace(
        base,
        words=f"Which column of {path.name} holds the {what}{of}?",
        options=tuple(_take(base.place, columns[name]) for name in likely),
        others=tuple(rest),
    )


def _ratio(base: Question, sketch: Sketch) -> Question:
    """The ratio of absorption; those that papers adopt for these bands are offered."""
    index = {} if sketch.photometry is None else sketch.photometry.wesenheit
    band, colour = (index[key].value for key in ("band", "colour"))
    ends = colour if isinstance(colour, list) else str(colour).split("-")
    pair = " - ".join(ends)
    return replace(
        base,
        words=f"How much of the colour is taken off: R in {band} - R ({pair})?",
        saw="No table tells; it follows from the law of reddening and the passbands.",
        options=tuple(
            _set(f"{value} ({source})", base.place, value)
            for value, source in recipes(str(band), ends)
        ),
        typed=NUMBER,
    )


# --- anchors -----------------------------------------------------------------------------


def _anchors(base: Question, entry: Entry, draft: Draft) -> Question:
    """In which column of a table of moduli the galaxies' names stand."""
    path, sketch = draft.sources[GEOMETRIC]
    table = read_table(path, "")
    names = entry.choice.offers or sketch.columns["host"].offers or tuple(sketch.roles.by_name)
    options = []
    for name in names:
        chosen = replace(sketch, columns={**sketch.columns, "host": Choice(name)})
        made = anchor_entries(chosen, table, hosts_of(draft.sources))
        changes = tuple(((*one.section, one.key), one.choice.value) for one in made)
        options.append(Option(_take((), sketch.roles.by_name[name]).words, changes))
    words = column_question("host", path.name)
    return replace(base, words=words, options=tuple(options), matters=matters("host"))


def _anchor(entry: Entry, draft: Draft) -> Question:
    section, galaxy = entry.section, entry.section[-1]
    pair = {e.key: e.choice for e in draft.undecided if e.section == section}
    values = [pair[key].offers for key in ("modulus", "error") if key in pair]
    saw, place = _sentence(_text(entry.choice)), (*section, entry.key)
    if len(values) == 2 and len(values[0]) == len(values[1]) > 1:
        places = ((*section, "modulus"), (*section, "error"))
        rows = _rows_of(draft, galaxy)
        options = [
            Option(
                f"{modulus} \u00b1 {error} mag{rows.get(number, '')}",
                ((places[0], float(modulus)), (places[1], float(error))),
            )
            for number, (modulus, error) in enumerate(zip(*values, strict=True))
        ]
        path = draft.sources[GEOMETRIC][0]
        saw = f"{path.name} has {len(options)} rows of {galaxy}."
        words = f"Which modulus of {galaxy} is the anchor's?"
        return Question(
            places[0], words, saw, matters("modulus"), (*options, _without(section)), asks=places
        )
    return _number_of(place, entry.choice.offers, saw)


def _number_of(place: Place, values: Sequence[str], saw: str) -> Question:
    """The modulus of a galaxy, or its error, alone."""
    galaxy, what = place[2], "modulus" if place[3] == "modulus" else "error of the modulus"
    options = [_set(f"{value} mag", place, float(value)) for value in values]
    words, why = f"What is the {what} of {galaxy}?", matters(place[3])
    every = (*options, _without(place[:3]))
    return Question(place, words, saw, why, every, typed=NUMBER, unit="mag")


def _without(section: Place) -> Option:
    return Option("leave this galaxy out of the anchors", ((section, None),))


def _rows_of(draft: Draft, galaxy: str) -> dict[int, str]:
    """What else the rows of a galaxy say, so that they can be told apart."""
    path, sketch = draft.sources[GEOMETRIC]
    table, host = read_table(path, ""), sketch.columns["host"]
    if host.undecided:
        return {}
    used = {str(choice.value) for choice in sketch.columns.values()}
    rest = [
        c.name for c in sketch.roles.by_name.values() if c.name not in used and c.numbers is None
    ]
    rows = np.flatnonzero(table.texts(str(host.value)).equal(galaxy))
    said = {}
    for number, row in enumerate(rows):
        cells = [_cut(table.texts(name).cell(int(row))) for name in rest]
        said[number] = "".join(f", {cell}" for cell in cells if cell)
    return said


# --- the relations -----------------------------------------------------------------------


def _metallicity(entry: Entry, base: Question, draft: Draft) -> Question:
    none = Option(_NONE, (((*entry.section,), "none"),))
    if entry.key == "scale":
        options = (*(_set(scale, base.place, scale) for scale in _SCALES), none)
        words = "On which scale are the metallicities?"
        columns = [
            (path.name, sketch.roles.decided("metallicity"))
            for path, sketch in draft.sources.values()
        ]
        held = [f"{c.name} of {name} is {_holds(c)}" for name, c in columns if c is not None]
        saw = f"{'; '.join(held)}. Neither name nor values tell."
        saw = base.saw if "bring them" in base.saw or not held else saw
        return replace(base, words=words, saw=saw, options=options)
    words = "At which metallicity is the zero point stated?"
    options = (
        _set("0, solar on a relative scale", base.place, 0.0),
        _set("8.69, solar 12+log(O/H) (Asplund et al. 2009)", base.place, 8.69),
    )
    return replace(
        base, words=words, saw="It depends on the scale.", options=options, typed=NUMBER, unit="dex"
    )


def _term(entry: Entry, base: Question) -> Question:
    key, value = ("step", 10.0) if entry.key == "host_mass" else ("reference", None)
    value = value if value is not None else 1.1 if entry.key == "decline_rate" else 0.0
    words = f"Are the peaks standardised for the {TERMS.get(entry.key, entry.key)} already?"
    options = (
        _set("yes: no term", base.place, "none"),
        _set(f"no: fit a term, {key} {value:g}", base.place, {key: value}),
    )
    saw = "Every table of supernovae has such a column; none says what the peaks are."
    return replace(base, words=words, saw=saw, options=options)


# --- helpers -----------------------------------------------------------------------------


def _set(words: str, place: Place, value: Any) -> Option:
    return Option(words, ((place, value),))


def _job(entry: Entry) -> str:
    section = entry.section
    return ".".join(
        section[:2] if section[:1] == ("anchors",) and len(section) > 1 else section[:1]
    )


def _text(choice: Choice) -> str:
    return str(choice.value).removeprefix(UNDECIDED).strip()


def _sentence(text: str) -> str:
    plain = text.strip()
    plain = plain[:1].upper() + plain[1:]
    return plain if plain.endswith((".", "?", "!")) else f"{plain}."


def _listed(names: Sequence[str]) -> str:
    return " and ".join([", ".join(names[:-1]), names[-1]] if len(names) > 1 else names)


def fresh(draft: Draft) -> dict[Place, Any]:
    """Every entry of a draft by its path."""
    return {(*entry.section, entry.key): entry.choice.value for entry in draft.entries}


def tables_of(mapping: Mapping[str, Any]) -> Iterator[str]:
    """The tables that a ladder file names, open keys left out."""
    for key, value in mapping.items():
        if key == "table" and isinstance(value, str) and not value.startswith(UNDECIDED):
            yield value
        elif isinstance(value, Mapping):
            yield from tables_of(value)
