"""A result in plain words."""

from __future__ import annotations

import handmade

from ladderfit.wording import pareto_words, printable, summary_text


def test_warnings_and_pareto_k_are_put_into_words() -> None:
    assert "well" in pareto_words(0.2)
    assert "tails" in pareto_words(0.6)
    assert "do NOT trust" in pareto_words(0.9)
    result = handmade.result(
        handmade.ladder(),
        diagnostics={"pareto_k": 0.93, "notes": ("The data add nothing to the prior.",)},
        parallax_offset=0.0,
    )
    text = summary_text(result)
    assert "Pareto k = 0.93: do NOT trust these numbers" in text
    assert "Note: The data add nothing to the prior." in text
    (line,) = (line for line in text.splitlines() if "residual parallax offset" in line)
    assert "0 (fixed)" in line
    assert "fewest" not in text  # all have the same number of effective draws


def test_the_hubble_constants_prior_is_explained() -> None:
    result = handmade.result(handmade.ladder())
    text = " ".join(summary_text(result).split())
    assert "normal in 5 log10 (median, width in mag): 46 % wide" in text


def test_names_from_tables_cannot_steer_the_terminal() -> None:
    assert (
        printable("Q07\x1b[2J\nnew")
        == "Q07\N{REPLACEMENT CHARACTER}[2J\N{REPLACEMENT CHARACTER}new"
    )
