"""A slider with one or two thumbs that tells a drag from its release."""

from __future__ import annotations

import anywidget
import traitlets

from ladderfit.workbench.axis import ASSETS


class Range(anywidget.AnyWidget):
    """Thumbs and number fields for one number or two.

    Traits
    ------
    value : list of float
        One number, or a lower and a higher one.
    request : dict
        Set by the page with every move: ``number`` counts up, ``settled`` is true on
        release, and ``value`` is what was asked for.
    """

    _esm = ASSETS / "range.js"
    _css = ASSETS / "range.css"
    label = traitlets.Unicode().tag(sync=True)
    unit = traitlets.Unicode().tag(sync=True)
    low = traitlets.Float(0.0).tag(sync=True)
    high = traitlets.Float(1.0).tag(sync=True)
    log = traitlets.Bool(False).tag(sync=True)
    digits = traitlets.Int(3).tag(sync=True)
    value: traitlets.List[float] = traitlets.List().tag(sync=True)
    request = traitlets.Dict().tag(sync=True)
