"""From a picture and its references to the certified table that brings it towards them."""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from concurrent.futures import Future, ThreadPoolExecutor
from functools import cached_property
from types import MappingProxyType
from typing import Any

import attrs
import numpy as np

from hueferry.arrays import Mask
from hueferry.evidence.agree import HOLD_LIMIT, agree
from hueferry.evidence.camera import NAMES, Parameters
from hueferry.evidence.controls import hold_colours, keep_neutrals_of, only_chroma, only_tone
from hueferry.evidence.evidence import Basis, Evidence
from hueferry.evidence.reduced import Reduced
from hueferry.fitting.reference import Reference, joint_palette
from hueferry.fitting.settings import Aim, Only, Settings
from hueferry.fitting.tabulate import Tabulated, carried, mean_move, tabulate
from hueferry.fitting.view import view_of
from hueferry.maps.method import Method
from hueferry.maps.methods import fit_map
from hueferry.maps.protocol import Map
from hueferry.measure.cost import Cost, quick_cost
from hueferry.palettes.build import palette_of
from hueferry.palettes.palette import Palette
from hueferry.picture import Encoding, Picture
from hueferry.tables.certificate import Certificate
from hueferry.tables.table import Table

DEFAULT_METHOD = Method.ENTROPIC
"""What `auto` means under `adopt`: the best of the truth benchmark where the content is the same."""

_PARTS: Mapping[Only, Callable[[Map], Map]] = MappingProxyType({Only.TONE: only_tone, Only.CHROMA: only_chroma})


@attrs.frozen(eq=False)
class Given:
    """A map that was decided elsewhere.

    Attributes:
        map: Oklab to Oklab.
        evidence: for it.
        open: where the picture itself shows surfaces of a reference, these may say the rest.
    """

    map: Map
    evidence: Evidence
    open: bool = True


@attrs.frozen(eq=False)
class Fit:
    """What brings one picture towards its references, and what it rests on.

    Attributes:
        map: Oklab to Oklab, as it was wanted.
        table: the lattice of the map for the picture's encoding, made safe; this is what is applied.
        certificate: what was measured on the table.
        evidence: what the correction rests on.
        encoding: of the picture.
        palette: the picture's colours.
        palette_after: the same colours through the table, in the same order.
        target: the palette it was brought towards.
        sentences: what was done and why, for people.
        untouched: no part of the way was to be gone (strength 0).
    """

    map: Map
    table: Table
    certificate: Certificate
    evidence: Evidence
    encoding: Encoding
    palette: Palette
    palette_after: Palette
    target: Palette
    sentences: tuple[str, ...]
    untouched: bool = False

    @property
    def leaves_alone(self) -> bool:
        """Whether nothing is to be changed; the file may then be copied as it is."""
        return self.evidence.basis is Basis.NONE or self.untouched

    @cached_property
    def cost_before(self) -> Cost:
        """Transport cost from the picture's palette to the reference's, ΔE*ab (D50); worked out when asked for."""
        return quick_cost(self.palette, self.target)

    @cached_property
    def cost_after(self) -> Cost:
        """The same for the palette that the table gives."""
        return quick_cost(self.palette_after, self.target)

    @cached_property
    def moved(self) -> float:
        """Mean ΔE00 by which the table moves the picture's colours."""
        return mean_move(self.palette, self.palette_after)

    @cached_property
    def view(self) -> Mapping[str, Any]:
        """What a report draws: palette groups, where colour went, tone and chroma curves; JSON values."""
        return view_of(self.table, self.encoding, self.palette, self.palette_after, self.target)

    def apply(self, picture: Picture) -> Picture:
        """Apply the table to a picture in the encoding of the one that was fitted; depth and metadata stay."""
        from hueferry.applying.engine import apply_table

        return apply_table(self.table, picture)

    def as_dict(self) -> dict[str, Any]:
        """Return every number as JSON values."""
        return {
            "cost_before": self.cost_before.as_dict(),
            "cost_after": self.cost_after.as_dict(),
            "moved": self.moved,
            "certificate": self.certificate.as_dict(),
            "evidence": self.evidence.as_dict(),
            "view": dict(self.view),
        }


def fit_picture(
    source: Picture,
    references: Sequence[Reference],
    settings: Settings,
    *,
    mask: Mask | None = None,
    hold: Mask | None = None,
    given: Given | None = None,
) -> Fit:
    """Find the table that brings `source` towards its references.

    Args:
        source: the picture to correct.
        references: at least one.
        settings: what is wanted.
        mask: (height, width) of the source, true where pixels count.
        hold: (height, width) of the source, true where colours must stay.
        given: what a series decided for this picture under the aim `agree`; None finds it here.

    Raises:
        InputError: no reference, or a mask of another size than the picture.
        SolverError: a transport plan could not be vouched for.
    """
    # All pixels are counted while evidence is gathered: neither needs the other, and there is more than one core.
    with ThreadPoolExecutor(1) as pool:
        counting = pool.submit(palette_of, source, mask=mask)
        target = joint_palette(references)
        task = _Task(source, counting, references, target, settings, mask, hold, given)
        wanted, evidence = _FITTERS[settings.aim](task)
        palette = task.palette
    result = tabulate(wanted, source.encoding, palette, settings, bits=source.bits)
    return Fit(
        map=result.map,
        table=result.table,
        certificate=result.certificate,
        evidence=evidence,
        encoding=source.encoding,
        palette=palette,
        palette_after=carried(result.table, source.encoding, palette),
        target=target,
        sentences=_sentences(evidence, result, settings),
        untouched=settings.strength == 0.0,
    )


def _sentences(evidence: Evidence, result: Tabulated, settings: Settings) -> tuple[str, ...]:
    share = () if settings.strength == 1.0 else (f"Went {100 * settings.strength:.0f} % of the way.",)
    return (evidence.decision, *share, *result.sentences)


@attrs.frozen(eq=False)
class _Task:
    source: Picture
    counting: Future[Palette]
    references: Sequence[Reference]
    target: Palette
    settings: Settings
    mask: Mask | None
    hold: Mask | None
    given: Given | None

    @property
    def palette(self) -> Palette:
        return self.counting.result()


def _fit_adopt(task: _Task) -> tuple[Map, Evidence]:
    method = task.settings.method or DEFAULT_METHOD
    map_ = fit_map(task.palette, task.target, method=method, seed=task.settings.seed)
    map_ = _controlled(map_, task)
    moved = mean_move(task.palette, attrs.evolve(task.palette, colours=map_(task.palette.colours)))
    decision = f"Took on the reference's palette ({method.value}), moving colours by {moved:.1f} ΔE00 on average."
    return map_, Evidence(basis=Basis.ADOPTED, decision=decision, palette_share=1.0, prior_share=0.0, moved=moved)


def _controlled(map_: Map, task: _Task) -> Map:
    if task.settings.keep_neutrals:
        map_ = keep_neutrals_of(map_)
    if task.settings.only is not None:
        map_ = _PARTS[task.settings.only](map_)
    if task.hold is not None:
        held = palette_of(task.source, mask=task.hold).colours
        map_ = hold_colours(map_, held, limit=HOLD_LIMIT)
    return map_


def _fit_agree(task: _Task) -> tuple[Map, Evidence]:
    settings = task.settings
    map_, evidence = _agreed(task) if task.given is None else _agreed_with_series(task, task.given)
    if settings.method is not None and evidence.basis is not Basis.NONE:
        wanted = attrs.evolve(task.palette, colours=map_(task.palette.colours))
        map_ = fit_map(task.palette, wanted, method=settings.method, seed=settings.seed)
    return map_, evidence


def _agreed(task: _Task, *, known: Parameters | None = None) -> tuple[Map, Evidence]:
    settings = task.settings
    return agree(
        task.source,
        _witnesses(task.references),
        keep_neutrals=settings.keep_neutrals,
        only=None if settings.only is None else settings.only.value,
        hold=task.hold,
        mask=task.mask,
        seed=settings.seed,
        known=known,
    )


def _agreed_with_series(task: _Task, given: Given) -> tuple[Map, Evidence]:
    """Take the series' map; where the picture itself shows surfaces of a reference, they say the rest."""
    if given.open and given.evidence.basis is Basis.PAIRS and any(one.witness is not None for one in task.references):
        known = np.array([given.evidence.camera[name] for name in NAMES])
        map_, evidence = _agreed(task, known=known)
        if evidence.basis is Basis.PAIRS:
            return map_, evidence
    return _controlled(given.map, task), given.evidence


def _witnesses(references: Sequence[Reference]) -> list[Reduced | Palette]:
    """Return the reduced picture of each reference, or its palette where there is no picture."""
    return [one.palette if one.witness is None else one.witness for one in references]


_FITTERS: Mapping[Aim, Callable[[_Task], tuple[Map, Evidence]]] = MappingProxyType(
    {Aim.ADOPT: _fit_adopt, Aim.AGREE: _fit_agree}
)
