"""The page's own clock: while something is under way it asks the kernel for news."""

from __future__ import annotations

import sys

import anywidget
import traitlets

from ladderfit.workbench.axis import ASSETS


class Pulse(anywidget.AnyWidget):
    """Nothing to see; beats while `every` is above zero.

    Beats come in on the thread that serves the page's other messages, which alone
    may touch widgets.  A page that is closed asks nothing; one that is opened again does.

    Traits
    ------
    every : int
        Milliseconds between two beats; 0 for none.
    beat : int
        Counted up by the page.
    """

    _esm = ASSETS / "pulse.js"
    every = traitlets.Int(0).tag(sync=True)
    beat = traitlets.Int(0).tag(sync=True)


def in_kernel() -> bool:
    """Whether a Jupyter kernel runs, so that there is a page to beat."""
    core = sys.modules.get("IPython")
    shell = None if core is None else core.get_ipython()
    return getattr(shell, "kernel", None) is not None
