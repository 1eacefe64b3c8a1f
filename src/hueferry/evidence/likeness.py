"""What palettes say where no surface is seen twice.

Two scenes are registered, and what is found is believed as far as it exceeds what content alone does (`blocks`). Two
pictures that explain each other clearly less than the halves of one picture do are strangers: between them a
difference is content, not light, and nothing is said.
"""

from __future__ import annotations

from math import exp

import numpy as np

from hueferry.colour.difference import delta_e_2000
from hueferry.colour.spaces import oklab_to_lab
from hueferry.evidence.blocks import content_covariance, whitener
from hueferry.evidence.camera import SIZE, CameraMap
from hueferry.evidence.evidence import Basis
from hueferry.evidence.prior import Prior
from hueferry.evidence.reduced import Reduced
from hueferry.evidence.registration import explained, register
from hueferry.evidence.scene import FEWEST
from hueferry.evidence.witness import Witness

CAUTION = 3.0
"""What the content covariance counts for: halves of one picture have more in common than two pictures of one scene."""

STRANGE, SHARP = 0.82, 0.02
"""Likeness, as a share of the halves' own, at which strangers are as likely as one scene; and the slope of that."""

LEAST_TRUST = 0.3
"""Chance of one scene below which nothing is said."""

DOUBT = 0.25
"""Share of the squared content error that a change must exceed to be acted on; it is taken off what is found."""

LEAST_MOVE = 0.5
"""Mean ΔE00 of a change below which it is not worth making on palettes alone."""

STRANGERS = "the pictures share no surface and not even the same stuff, so content explains what separates them"


def hear_palettes(source: Reduced, reference: Reduced, prior: Prior) -> Witness:
    """Say what the palettes support."""
    if min(len(source.scene), len(reference.scene)) < FEWEST:
        return silent("too little of the pictures is left to compare once clipped and masked pixels are out")
    spread = min(float(scene.colours.std(axis=0).max()) for scene in (source.scene, reference.scene))
    usual = max(source.content.likeness, reference.content.likeness)
    if spread < 0.005 or not usual:
        return silent("a picture of one flat colour does not tell light from content")
    found = register(source.scene, reference.scene, prior)
    ratio = explained(source.scene, reference.scene, found) / usual
    trust = 1 / (1 + exp(min((STRANGE - ratio) / SHARP, 700.0)))
    if trust < LEAST_TRUST:
        return silent(STRANGERS)
    whiten = whitener(prior)
    change = whiten @ (found - prior.mean)
    covariance = content_covariance(source.content, reference.content)
    beyond = 1 - DOUBT * float(np.trace(covariance)) / max(float(change @ change), 1e-12)
    if beyond <= 0:
        return silent("what separates the palettes is no more than content does within one picture")
    precision = whiten.T @ np.linalg.inv(CAUTION * covariance) @ whiten
    mean = np.linalg.solve(np.eye(SIZE) + CAUTION * covariance, change)
    parameters = prior.mean + trust * beyond * np.linalg.solve(whiten, mean)
    colours = source.scene.colours
    moved = delta_e_2000(oklab_to_lab(CameraMap(parameters)(colours)), oklab_to_lab(colours))
    if float(moved.mean()) < LEAST_MOVE:
        return silent("the palettes already agree as nearly as palettes can tell")
    return Witness(basis=Basis.PALETTE, parameters=parameters, precision=trust * beyond * precision)


def silent(reason: str) -> Witness:
    """Return a witness that says nothing, and why."""
    return Witness(basis=Basis.NONE, reason=reason)
