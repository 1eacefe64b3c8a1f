"""What palettes say where no surface is seen twice.

Two scenes are registered, and what is found is believed as far as it exceeds what content alone does (`blocks`). Two
pictures that explain each other clearly less than the halves of one picture do are strangers: between them a
difference is content, not light, and nothing is said.
"""

from __future__ import annotations

from math import exp

import attrs
import numpy as np

from hueferry.arrays import Colours
from hueferry.colour.difference import delta_e_2000
from hueferry.colour.spaces import oklab_to_lab
from hueferry.evidence.blocks import Content, content_covariance, content_of, whitener
from hueferry.evidence.camera import SIZE, CameraMap, Parameters
from hueferry.evidence.evidence import Basis
from hueferry.evidence.prior import Prior
from hueferry.evidence.reduced import Reduced
from hueferry.evidence.registration import explained, register
from hueferry.evidence.scene import FEWEST, Scene, scene_of_palette, scene_of_pixels
from hueferry.evidence.witness import Witness
from hueferry.palettes.palette import Palette

CAUTION = 3.0
"""What the content covariance counts for: halves of one picture have more in common than two pictures of one scene."""

STRANGE, SHARP = 0.82, 0.02
"""Likeness, as a share of the halves' own, at which strangers are as likely as one scene; and the slope of that."""

STRANGE_COLOURS = 1.0
"""The same where colours alone are compared, without texture."""

LEAST_SPREAD = 0.005
"""Oklab; deviation of the colours below which a picture is flat."""

LEAST_TRUST = 0.3
"""Chance of one scene below which nothing is said."""

DOUBT = 0.25
"""Share of the squared content error that a change must exceed to be acted on; it is taken off what is found."""

LEAST_MOVE = 0.5
"""Mean ΔE00 of a change below which it is not worth making on palettes alone."""

STRANGERS = "the pictures share no surface and not even the same stuff, so content explains what separates them"


def hear_palettes(source: Reduced, reference: Reduced, prior: Prior) -> Witness:
    """Say what the patches of two pictures support."""
    return _hear(Side(source.scene, source.content), Side(reference.scene, reference.content), prior, strange=STRANGE)


def hear_saved_palette(source: Reduced, reference: Palette, prior: Prior) -> Witness:
    """Say what a palette without its picture supports: colours alone, so more likeness is asked for."""
    ours = scene_of_pixels(source.oklab, source.usable & ~source.clipped)
    theirs = scene_of_palette(reference)
    nothing_known = Content(np.zeros((SIZE, SIZE)), 0, 0.0)
    return _hear(Side(ours, content_of(ours)), Side(theirs, nothing_known), prior, strange=STRANGE_COLOURS)


@attrs.frozen(eq=False)
class Side:
    """One of the two that are compared, with what content alone does within it."""

    scene: Scene
    content: Content


def _hear(ours: Side, theirs: Side, prior: Prior, *, strange: float) -> Witness:
    if min(len(ours.scene), len(theirs.scene)) < FEWEST:
        return silent("too little of the pictures is left to compare once clipped and masked pixels are out")
    spread = min(float(side.scene.colours.std(axis=0).max()) for side in (ours, theirs))
    usual = max(ours.content.likeness, theirs.content.likeness)
    if spread < LEAST_SPREAD or not usual:
        return silent("a picture of one flat colour does not tell light from content")
    found = register(ours.scene, theirs.scene, prior)
    trust = _trust(explained(ours.scene, theirs.scene, found) / usual - strange)
    if trust < LEAST_TRUST:
        return silent(STRANGERS)
    whiten = whitener(prior)
    change = whiten @ (found - prior.mean)
    covariance = content_covariance(ours.content, theirs.content)
    beyond = 1 - DOUBT * float(np.trace(covariance)) / max(float(change @ change), 1e-12)
    if beyond <= 0:
        return silent("what separates the palettes is no more than content does within one picture")
    shrunk = np.linalg.solve(np.eye(SIZE) + CAUTION * covariance, change)
    parameters = prior.mean + trust * beyond * np.linalg.solve(whiten, shrunk)
    if _moved(parameters, ours.scene.colours) < LEAST_MOVE:
        return silent("the palettes already agree as nearly as palettes can tell")
    precision = whiten.T @ np.linalg.inv(CAUTION * covariance) @ whiten
    return Witness(basis=Basis.PALETTE, parameters=parameters, precision=trust * beyond * precision)


def _trust(excess: float) -> float:
    """Return the chance of one scene from how far its likeness lies above that of strangers."""
    return 1 / (1 + exp(min(-excess / SHARP, 700.0)))


def _moved(parameters: Parameters, colours: Colours) -> float:
    return float(delta_e_2000(oklab_to_lab(CameraMap(parameters)(colours)), oklab_to_lab(colours)).mean())


def silent(reason: str) -> Witness:
    """Return a witness that says nothing, and why."""
    return Witness(basis=Basis.NONE, reason=reason)
