"""What a report says in words: the summary, verdicts, facts, methods and cautions."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from statistics import median
from types import MappingProxyType
from typing import Any

Json = Mapping[str, Any]

CAUTIONS: Mapping[str, Sequence[str]] = MappingProxyType(
    {
        "stain": (
            "For research use only; not validated for diagnosis.",
            "Colour normalisation can change what a later analysis or a reader sees.",
            "Defer to the laboratory's own validated procedures and licensed practice.",
        ),
        "match": ("Where photographs serve as evidence, keep the originals.",),
    }
)

METHODS: Mapping[str, str] = MappingProxyType(
    {
        "agree": (
            "Every picture was brought towards the reference under the aim “agree”: only the change of light and "
            "camera was undone. All pixels were counted into palettes of at most 1,024 weighted colours in Oklab. "
            "Surfaces that both pictures show were found by scale-invariant keypoints and a verified homography, and "
            "paired colours were read from the aligned pictures; palettes were discounted by the variation between "
            "blocks of one picture. A camera-like map (exposure, white balance, tone, chroma) was estimated by maximum "
            "a posteriori with a heavy-tailed likelihood and a prior centred on no change, and judged on surfaces that "
            "the fit had not seen. The map was sampled as a lattice, regularised until no tetrahedron folds and no "
            "occupied cell exceeds the gain cap, and applied by tetrahedral interpolation at the file's own depth. "
            "Costs are root mean square transport distances in CIELAB (D50)."
        ),
        "adopt": (
            "Every picture took on the palette of the reference (aim “adopt”). All pixels were counted into palettes "
            "of at most 1,024 weighted colours in Oklab, and a transport map between the palettes was computed by the "
            "method named in the settings. The map was sampled as a lattice, regularised until no tetrahedron folds "
            "and no occupied cell exceeds the gain cap, and applied by tetrahedral interpolation at the file's own "
            "depth. Costs are root mean square transport distances in CIELAB (D50)."
        ),
    }
)

REMAINS: Mapping[str, str] = MappingProxyType(
    {
        "agree": "Under the aim “agree” a cost may rightly remain: it is the difference of content, left alone.",
        "adopt": "Under the aim “adopt” a cost remains where the gain cap forbids to stretch colours further.",
    }
)

_COMMON_SOURCES = (
    "Ottosson, B. (2020). A perceptual color space for image processing.",
    "CIE 15:2018. Colorimetry. Sharma, G., Wu, W., Dalal, E. N. (2005). The CIEDE2000 color-difference formula. "
    "Color Research & Application 30(1), 21-30.",
    "Peyré, G., Cuturi, M. (2019). Computational optimal transport. Foundations and Trends in Machine Learning 11.",
)
SOURCES: Mapping[str, Sequence[str]] = MappingProxyType(
    {
        "agree": (
            *_COMMON_SOURCES,
            "Lowe, D. G. (2004). Distinctive image features from scale-invariant keypoints. IJCV 60(2), 91-110.",
        ),
        "adopt": (
            *_COMMON_SOURCES,
            "Pitié, F., Kokaram, A. (2007). The linear Monge-Kantorovitch linear colour mapping. CVMP.",
            "Feydy, J., et al. (2019). Interpolating between optimal transport and MMD using Sinkhorn divergences. "
            "AISTATS.",
        ),
    }
)


def summary(record: Json) -> str:
    """Say in one sentence or two what was done and what it changed."""
    entries = record["entries"]
    if not entries:
        return "Nothing was done."
    before = median(entry["numbers"]["cost_before"]["w2"] for entry in entries)
    after = median(entry["numbers"]["cost_after"]["w2"] for entry in entries)
    safe = sum(entry["numbers"]["certificate"]["safe"] for entry in entries)
    where = record["sentences"][0]
    failed = f" {len(record['failures'])} could not be done." if record["failures"] else ""
    maps = "every map is safe" if safe == len(entries) else f"{safe} of {len(entries)} maps are safe"
    return (
        f"Brought {where}. The median transport cost to the reference went from {before:.1f} to {after:.1f} ΔE*ab, "
        f"and {maps}.{failed}"
    )


def plain_verdict(certificate: Json) -> str:
    """Say in a word or two whether a map may be trusted."""
    if not certificate["safe"]:
        return "look at this map"
    if certificate["newly_clipped"] > 0.001:
        return "safe, but look at clipping"
    return "safe"


def said(certificate: Json) -> list[str]:
    """Say a certificate in plain words."""
    folds = "No colour is folded or inverted" if certificate["folds"] == 0 else f"{certificate['folds']} folds"
    lines = [
        f"{folds}, in any of {certificate['tetrahedra']:,} tetrahedra.",
        f"Contrast of neighbouring colours, and grain with it, grows at most {certificate['largest_gain']:.2f} times "
        f"(cap {certificate['max_gain']:g}).",
        f"{100 * certificate['newly_clipped']:.2f} % of the picture reaches the end of the code range anew.",
        f"Grays take on at most {certificate['neutral_drift']:.1f} C*ab.",
    ]
    error = certificate.get("error")
    if error is not None:
        lines.append(f"The table follows its map within {error['high']:.2f} of 255 codes for 99.9 % of colours.")
    return lines


def evidence_facts(evidence: Json) -> list[tuple[str, str]]:
    """List what a correction rests on."""
    facts = [
        ("rests on", str(evidence["basis"])),
        ("from pairs", f"{100 * evidence['pairs_share']:.0f} %"),
        ("from palettes", f"{100 * evidence['palette_share']:.0f} %"),
        ("from the prior", f"{100 * evidence['prior_share']:.0f} %"),
        ("paired colours", f"{evidence['pairs']:,}"),
        ("surface shared", f"{100 * evidence['coverage']:.0f} %"),
        ("error expected", f"{evidence['expected_error']:.2f} ΔE00"),
    ]
    if evidence.get("judged_before") is not None:
        judged = f"{evidence['judged_before']:.2f} → {evidence['judged_after']:.2f} ΔE00"
        facts.append(("judged on unseen pairs", judged))
    return facts


def setting_facts(settings: Json) -> list[tuple[str, str]]:
    """List settings by name, in words."""
    return [(name.replace("_", " "), "auto" if value is None else str(value)) for name, value in settings.items()]
