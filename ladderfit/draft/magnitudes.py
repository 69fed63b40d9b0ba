"""Which magnitudes a table of Cepheids has, and what to build of them."""

from __future__ import annotations

import re
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field

from ladderfit.draft.clues import spread_of
from ladderfit.draft.facts import Facts
from ladderfit.draft.roles import Choice, Roles, open_choice
from ladderfit.inputs.kinds import MAGNITUDE
from ladderfit.schema import UNDECIDED

_FAINTEST, _BRIGHTEST = 40.0, -15.0  # mag
_BAND = (
    r"[ubvrijhkgyzw]s?\d?|f\d{3}(w|lp|m|n)|bp|rp|g(bp|rp)|w(h|i|vi|jk|g|hvi|ivi)|mw[a-z]*|"
    r"m\d{1,2}|ch\d|wesenheit\w*"
)
_INDEX = r"w|m?w(h|i|vi|jk|g|hvi|ivi)|wesenheit\w*"
_COLOUR = r"\(?([A-Za-z]\w*?)\)?(?:-|_minus_|_-_| - )\(?([A-Za-z]\w*?)\)?0?"

# Indices in use: band, blue, red (any of the names), and ratios that papers adopt.
_RECIPES = (
    (("h", "f160w"), ("v", "f555w"), ("i", "f814w"), "0.386 (Riess et al. 2019)"),
    (
        ("i", "f814w"),
        ("v", "f555w"),
        ("i", "f814w"),
        "1.55 (Udalski et al. 1999, for V and I) or 1.3 (Riess et al. 2019, for F555W and F814W)",
    ),
    (("g",), ("bp", "gbp"), ("rp", "grp"), "1.90 (Ripepi et al. 2019)"),
)


@dataclass(frozen=True)
class Photometry:
    """The magnitude of a section: bands, errors and either one band or an index.

    Attributes
    ----------
    bands, errors : mapping of str to Choice
    band : Choice or None
    wesenheit : mapping of str to Choice
        ``band``, ``colour`` and ``ratio``, or nothing.
    """

    bands: Mapping[str, Choice]
    errors: Mapping[str, Choice]
    band: Choice | None = None
    wesenheit: Mapping[str, Choice] = field(default_factory=dict)

    @property
    def told(self) -> dict[str, Choice]:
        """Bands and errors, for the summary."""
        errors = {f"error of {name}": choice for name, choice in self.errors.items()}
        told = {f"magnitude {name}": choice for name, choice in self.bands.items()} | errors
        if self.band is not None:
            told["band"] = self.band
        elif self.wesenheit:
            band, colour = (self.wesenheit[key].value for key in ("band", "colour"))
            words = "-".join(colour) if isinstance(colour, list) else str(colour)
            told["index"] = Choice(f"{band} - ratio ({words})", "free of reddening")
        return told


@dataclass(frozen=True, eq=False)
class Light:
    """The magnitudes and colours of a table, taken from its free columns; errors come later."""

    listed: Mapping[str, Facts]
    used: Sequence[str]
    band: Choice | None
    wesenheit: Mapping[str, Choice]

    def with_errors(self, roles: Roles) -> Photometry:
        """Find the errors among the columns that are still free, and take them."""
        bands = {name: Choice(column.name, _why(column)) for name, column in self.listed.items()}
        errors = _errors(roles, self.listed, self.used)
        return Photometry(bands, errors, self.band, self.wesenheit)


def take_magnitudes(roles: Roles) -> Light:
    """Take the magnitudes from the columns that are free, and see what to build of them."""
    found = {label_of(column.name): column for column in roles.free if is_magnitude(column)}
    colours = {label_of(column.name): column for column in roles.free if is_colour(column)}
    for column in (*found.values(), *colours.values()):
        roles.free.remove(column)
    if not found:
        return Light({}, [], Choice(f"{UNDECIDED} no column looks like a magnitude"), {})
    band, index, used = _choose(list(found), list(colours))
    listed = {**found, **{name: colours[name] for name in colours if name in used}}
    return Light(listed, used, band, index)


def is_magnitude(column: Facts) -> bool:
    """Whether a column is one of magnitudes: in mag, or in no unit and named like a band."""
    numbers = column.in_unit_of(MAGNITUDE)
    if numbers is None or column.error or is_colour(column):
        return False
    if not column.within(_BRIGHTEST, _FAINTEST, numbers):
        return False
    named = re.fullmatch(_BAND, _letters(label_of(column.name))) is not None
    named = named or "mag" in column.name.lower()
    # magnitudes are not all small: that is how errors look
    return named or (column.unit is not None and not column.within(-0.8, 0.8, numbers))


def is_colour(column: Facts) -> bool:
    """Whether a column is named like the difference of two bands."""
    parts = re.fullmatch(_COLOUR, column.name.strip())
    if parts is None or column.error or column.in_unit_of(MAGNITUDE) is None:
        return False
    return all(re.fullmatch(_BAND, _letters(part)) is not None for part in parts.groups())


def recipes(band: str, colour: Sequence[str]) -> list[tuple[float, str]]:
    """Ratios that papers adopt for an index, with their sources."""
    found: list[tuple[float, str]] = []
    for main, blue, red, text in _RECIPES:
        ends = [_letters(name) for name in colour]
        fits = len(ends) == 2 and ends[0] in blue and ends[1] in red
        if fits and _letters(band) in main:
            parts = re.findall(r"([\d.]+) \(([^()]*)\)", text)
            found += [(float(value), source) for value, source in parts]
    return found


def _letters(label: str) -> str:
    return label.lower().replace("_", "")


def label_of(name: str) -> str:
    """The short name of a band: ``Vmag`` and ``V_mag`` are V, ``phot_g_mean_mag`` is g."""
    colour = re.fullmatch(_COLOUR, name.strip())
    if colour is not None and "mag" not in name:
        return "-".join(colour.groups())
    short = re.sub(r"(?i)^phot_|[<>\s]|_?mean(?=_|$)|_?mag(nitude)?s?$|^mag_?", "", name).strip("_")
    return short if re.search(r"[A-Za-z]", short) else name


def _why(column: Facts) -> str:
    numbers = column.in_unit_of(MAGNITUDE)
    unit = "" if column.unit is None else f"in {column.unit}, "
    return unit + ("" if numbers is None else spread_of(numbers))


def _choose(
    labels: Sequence[str], colours: Sequence[str]
) -> tuple[Choice | None, dict[str, Choice], list[str]]:
    """One band or an index, and which labels that may need."""
    finished = [name for name in labels if re.fullmatch(_INDEX, _letters(name))]
    if len(finished) == 1:
        return Choice(finished[0], "named like a finished index"), {}, finished
    if len(finished) > 1:
        return open_choice(finished), {}, finished
    for band, blue, red, ratio in _RECIPES:
        main, colour = _named(labels, band), _colour(labels, colours, blue, red)
        if main is not None and colour is not None:
            used = [main, *([colour] if isinstance(colour, str) else colour)]
            index = {
                "band": Choice(main),
                "colour": Choice(colour),
                "ratio": Choice(f"{UNDECIDED} {ratio}, or another?"),
            }
            return None, index, used
    if len(labels) == 1:
        return Choice(labels[0], "the only magnitude"), {}, list(labels)
    more = "; or an index of them: wesenheit = {band, colour, ratio}"
    return open_choice(labels, more), {}, list(labels)


def _named(labels: Sequence[str], wanted: Sequence[str]) -> str | None:
    hits = [name for name in labels if _letters(name) in wanted]
    return hits[0] if len(hits) == 1 else None


def _colour(
    labels: Sequence[str], colours: Sequence[str], blue: Sequence[str], red: Sequence[str]
) -> str | list[str] | None:
    """Two bands, or one column that holds their difference."""
    pair = [_named(labels, blue), _named(labels, red)]
    if all(pair):
        return [str(name) for name in pair]
    for name in colours:
        parts = name.lower().split("-")
        if len(parts) == 2 and parts[0] in blue and parts[1] in red:
            return name
    return None


def _errors(roles: Roles, listed: Mapping[str, Facts], used: Sequence[str]) -> dict[str, Choice]:
    """An error column for every band in use, or one for the whole."""
    total = [c for c in roles.free if c.error and re.fullmatch(r"(tot|total|whole)(mag)?", c.stem)]
    if len(total) == 1:
        roles.free.remove(total[0])
        return {"total": Choice(total[0].name, "named like the error of the whole")}
    errors: dict[str, Choice] = {}
    for name, column in listed.items():
        found = roles.errors_for(column.name, needed=name in used)
        if found is not None:
            errors[name] = found
    return errors
