"""The map that removes differences of light and camera only, and what it rests on."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from types import MappingProxyType
from typing import Literal

import numpy as np

from hueferry.arrays import Colours, Mask
from hueferry.colour.difference import delta_e_2000
from hueferry.colour.spaces import oklab_to_lab
from hueferry.errors import InputError
from hueferry.evidence.camera import SIZE, CameraMap, Parameters
from hueferry.evidence.controls import hold_colours, keep_neutrals_of, only_chroma, only_tone
from hueferry.evidence.estimate import expected_error
from hueferry.evidence.evidence import Basis, Evidence
from hueferry.evidence.prior import Prior, no_change
from hueferry.evidence.reduced import Reduced, reduce_picture
from hueferry.evidence.refine import refine
from hueferry.evidence.testimony import hear
from hueferry.evidence.witness import Verdict, Witness, combine
from hueferry.maps.protocol import Map
from hueferry.palettes.palette import Palette
from hueferry.picture import Picture

HOLD_LIMIT = 1.0
"""ΔE00 that held colours may move."""

KNOWN = 0.1
"""How far a map that is already likely may be off, as a share of the deviations of an unknown one."""

_ONLY = MappingProxyType({"tone": only_tone, "chroma": only_chroma})
_SAMPLE = 500


def agree(  # noqa: PLR0913 - the settings of a fit, by name
    source: Picture | Reduced,
    references: Sequence[Picture | Reduced | Palette],
    *,
    keep_neutrals: bool = False,
    only: Literal["tone", "chroma"] | str | None = None,
    hold: Mask | None = None,
    mask: Mask | None = None,
    seed: int = 0,
    known: Parameters | None = None,
) -> tuple[Map, Evidence]:
    """Find the change of light and camera between `source` and `references`, and undo it as far as it is known.

    Args:
        source: the picture to correct, or its reduced form (then `mask` has been taken account of already).
        references: what it is brought towards, at least one: pictures, reduced forms, or palettes alone.
        keep_neutrals: leave the gray axis without colour.
        only: "tone" or "chroma" to correct that part alone.
        hold: (height, width) of the source, true where colours must not move more than `HOLD_LIMIT`.
        mask: (height, width) of the source, true where pixels count.
        seed: seed of every draw.
        known: (15,) parameters of the camera map that is already likely; None expects no change.

    Returns:
        The map, Oklab to Oklab, and the evidence. Where the evidence carries no correction the map moves nothing,
        and `Evidence.decision` says why.

    Raises:
        InputError: no reference, an unknown `only`, or a mask of another size.
    """
    if not references:
        raise InputError("there is no reference to agree with; give at least one")
    if only is not None and only not in _ONLY:
        raise InputError(f"only the tone or the chroma can be corrected alone, not {only!r}")
    ours = source if isinstance(source, Reduced) else reduce_picture(source, mask=mask)
    theirs = [reduce_picture(ref) if isinstance(ref, Picture) else ref for ref in references]
    sample = _sample(ours.colours, seed)
    if not len(sample):
        return _nothing("nothing of the picture counts: every pixel is masked, transparent or not finite", len(theirs))
    priors = [_prior(ours, their, known) for their in theirs]
    witnesses = [hear(ours, their, prior) for their, prior in zip(theirs, priors, strict=True)]
    prior = priors[0] if len(theirs) == 1 or known is not None else no_change()
    if all(witness.basis is Basis.NONE for witness in witnesses):
        return _nothing(witnesses[0].reason, len(theirs), witnesses=witnesses, error=_left(witnesses, prior, sample))
    verdict = combine(witnesses, prior, sample)
    if only is None and (ours.is_gray or all(_is_gray(their) for their in theirs)):
        only = "tone"
    map_ = _controlled(_refined(verdict, witnesses, sample), ours, keep_neutrals=keep_neutrals, only=only, hold=hold)
    return map_, _evidence(map_, verdict, witnesses, sample, _stops(ours, theirs))


def _prior(ours: Reduced, theirs: Reduced | Palette, known: Parameters | None) -> Prior:
    if known is None:
        return no_change(source_exposure=ours.exposure, reference_exposure=_exposure(theirs))
    return Prior(known, no_change().precision / KNOWN**2)


def identity() -> Map:
    """Return the map that moves nothing."""
    return CameraMap(np.zeros(SIZE))


def _refined(verdict: Verdict, witnesses: Sequence[Witness], sample: Colours) -> Map:
    map_ = CameraMap(verdict.parameters)
    found = [(w.correction, share) for w, share in zip(witnesses, verdict.influence, strict=True) if w.correction]
    return refine(map_, [one for one, _ in found], [share for _, share in found], sample) if found else map_


def _controlled(map_: Map, ours: Reduced, *, keep_neutrals: bool, only: str | None, hold: Mask | None) -> Map:
    map_ = keep_neutrals_of(map_) if keep_neutrals else map_
    if only is not None:
        map_ = _ONLY[only](map_)
    if hold is not None:
        map_ = hold_colours(map_, ours.colours_under(hold), limit=HOLD_LIMIT)
    return map_


def _nothing(
    reason: str, references: int, *, witnesses: Sequence[Witness] = (), error: float = 0.0
) -> tuple[Map, Evidence]:
    judged = next((witness.judged for witness in witnesses if witness.judged is not None), (None, None))
    found = [witness.pairs for witness in witnesses if witness.pairs is not None]
    return identity(), Evidence(
        basis=Basis.NONE,
        decision=f"Nothing was changed: {reason}.",
        pairs=sum(len(pairs) for pairs in found),
        coverage=max((pairs.coverage for pairs in found), default=0.0),
        inliers=sum(pairs.inliers for pairs in found),
        expected_error=error,
        influence=(0.0,) * references,
        judged_before=judged[0],
        judged_after=judged[1],
    )


def _left(witnesses: Sequence[Witness], prior: Prior, sample: Colours) -> float:
    """Return mean ΔE00 that stays unknown when nothing is changed: what pairs showed, or else the prior's spread."""
    judged = [witness.judged[0] for witness in witnesses if witness.judged is not None]
    if judged:
        return min(judged)
    return expected_error(identity(), prior.mean, np.asarray(np.linalg.inv(prior.precision)), sample)


def _sample(colours: Colours, seed: int) -> Colours:
    """Draw at most `_SAMPLE` colours, seeded."""
    if len(colours) <= _SAMPLE:
        return colours
    return colours[np.random.default_rng(seed).choice(len(colours), _SAMPLE, replace=False)]


def _exposure(reference: Reduced | Palette) -> float | None:
    return reference.exposure if isinstance(reference, Reduced) else None


def _is_gray(reference: Reduced | Palette) -> bool:
    if isinstance(reference, Reduced):
        return reference.is_gray
    return bool(np.abs(reference.colours[:, 1:]).max() < 0.01)


def _stops(ours: Reduced, theirs: Sequence[Reduced | Palette]) -> float | None:
    known = [exposure for exposure in map(_exposure, theirs) if exposure is not None]
    return None if ours.exposure is None or not known else float(ours.exposure - np.mean(known))


def _evidence(
    map_: Map, verdict: Verdict, witnesses: Sequence[Witness], sample: Colours, stops: float | None
) -> Evidence:
    says = np.array(verdict.influence)
    paired = np.array([witness.basis is Basis.PAIRS for witness in witnesses])
    pairs_share = float(says[paired].sum()) * verdict.data_share
    found = [witness.pairs for witness in witnesses if witness.pairs is not None]
    judged = [witness.judged for witness in witnesses if witness.judged is not None]
    basis = Basis.PAIRS if pairs_share * 2 >= verdict.data_share else Basis.PALETTE
    moved = float(delta_e_2000(oklab_to_lab(map_(sample)), oklab_to_lab(sample)).mean())
    error = expected_error(CameraMap(verdict.parameters), verdict.parameters, verdict.covariance, sample)
    facts: Mapping[Basis, str] = {
        Basis.PAIRS: f"the pictures show the same surfaces ({sum(len(pairs) for pairs in found)} pairs)",
        Basis.PALETTE: "the pictures show no common surface, and their palettes support a change of light in part",
    }
    return Evidence(
        basis=basis,
        decision=f"Moved by {moved:.1f} ΔE00 on average, because {facts[basis]}.",
        pairs_share=pairs_share,
        palette_share=verdict.data_share - pairs_share,
        prior_share=1 - verdict.data_share,
        pairs=sum(len(pairs) for pairs in found),
        coverage=max((pairs.coverage for pairs in found), default=0.0),
        inliers=sum(pairs.inliers for pairs in found),
        expected_error=error,
        moved=moved,
        influence=verdict.influence,
        judged_before=float(np.mean([before for before, _ in judged])) if judged else None,
        judged_after=float(np.mean([after for _, after in judged])) if judged else None,
        exposure_stops=stops,
        camera=CameraMap(verdict.parameters).as_dict(),
    )
