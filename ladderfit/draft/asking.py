"""Words of what a draft asks: the question, and why it matters."""

from __future__ import annotations

ROLES = {
    "star": "names of the stars",
    "name": "names of the objects",
    "host": "names of the galaxies",
    "period": "periods of pulsation",
    "log_period": "logarithms of the periods",
    "metallicity": "metallicities",
    "mode": "modes of pulsation",
    "system": "photometric systems",
    "parallax": "parallaxes",
    "peak": "peak magnitudes",
    "modulus": "distance moduli",
    "redshift": "redshifts with the background radiation at rest",
    "redshift_heliocentric": "redshifts with the Sun at rest, as observed",
    "distance": "distances",
    "velocity": "velocities",
    "survey": "names of the surveys",
}
MATTERS = {
    "period": "The slope and every distance follow from the periods.",
    "log_period": "The slope and every distance follow from the periods.",
    "host": "Stars and supernovae of one galaxy share its distance.",
    "mode": "Overtones of the same period are brighter; taken for fundamental, they bias the fit.",
    "metallicity": "Its term moves the zero point where anchors and hosts differ.",
    "parallax": "Another column is another sample of anchors.",
    "parallax_error": "It weighs each star against the others and against the geometric anchors.",
    "peak": "It ties the expansion to the hosts; both tables must mean the same peak.",
    "peak_error": "It weighs each supernova; what it leaves out goes into the scatter.",
    "redshift": "Against the Sun's frame it differs by up to 0.0012: 5 % of a redshift of 0.023.",
    "redshift_heliocentric": "It enters the luminosity distance by one factor 1 + z, so by up to "
    "0.1 %. Without it that factor is taken from the other redshift.",
    "band": "It decides how much dust is left in the magnitudes.",
    "ratio": "So much is taken off per magnitude of colour; where anchors and hosts differ in "
    "colour, another ratio moves the distances.",
    "corrected": "A zero point left out, or taken off twice, moves every parallax: 0.03 mas are "
    "6 % of the distance at 2 kpc.",
    "scale": "The term is per dex on this scale; the zero point is stated at a value on it.",
    "reference": "Changing it moves the zero point, and no distance.",
    "modulus": "The zero point, and so the Hubble constant, moves with the anchors' moduli.",
    "error": "It weighs this anchor against the others.",
    "width": "Standardising twice, or not at all, biases the peaks.",
    "decline_rate": "Standardising twice, or not at all, biases the peaks.",
    "colour": "Standardising twice, or not at all, biases the peaks.",
    "host_mass": "Standardising twice, or not at all, biases the peaks.",
}
TERMS = {
    "width": "width of the light curve",
    "decline_rate": "decline rate",
    "colour": "colour",
    "host_mass": "mass of the host",
}


def column_question(role: str, table: str) -> str:
    """What is asked of a column."""
    return f"Which column of {table} holds the {role_words(role)}?"


def role_words(role: str) -> str:
    """What a column with a role holds, in the plural."""
    if role.endswith("_error"):
        base = role.removesuffix("_error")
        return f"errors of the {ROLES.get(base, base.replace('_', ' '))}"
    return ROLES.get(role, role.replace("_", " "))


def matters(key: str) -> str:
    """Why a decision matters; "" where nothing is known of it."""
    return MATTERS.get(key, "")
