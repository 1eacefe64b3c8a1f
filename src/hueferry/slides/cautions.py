"""What everybody who corrects a slide is told: on the terminal, in the record and in the docs."""

from __future__ import annotations

CAUTIONS = (
    "Research use only; not validated for diagnosis.",
    "Colour normalisation can change what a later analysis or a reader sees.",
    "Defer to the laboratory's own validated procedures and to licensed practice.",
)
"""Shown with every result on slides."""

AMOUNT_IS_MEASURED = (
    "much of the tissue carries a brown stain such as DAB, whose amount is often the measurement itself; evening it "
    "out would change the result, so the slide is measured only; allow it explicitly to correct it all the same"
)
