"""hueferry brings a set of images into agreement in colour by optimal transport, and proves it.

```python
import hueferry as hf

picture = hf.read("a.tif")
fit = hf.fit(picture, to="hero.tif")
hf.write(fit.apply(picture), "out/a.tif")
```

The verbs are loaded when they are first used, so importing the package costs next to nothing.
"""

from __future__ import annotations

from importlib import import_module
from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from hueferry.api import apply, cost, fit, match, palette, read, report, write
    from hueferry.errors import HueferryError, InputError, SolverError
    from hueferry.fitting.fit import Fit
    from hueferry.measure.cost import Cost
    from hueferry.palettes.palette import Palette
    from hueferry.picture import Picture

__version__ = "0.1.0"

_HOMES = {
    "Cost": "hueferry.measure.cost",
    "Fit": "hueferry.fitting.fit",
    "HueferryError": "hueferry.errors",
    "InputError": "hueferry.errors",
    "Palette": "hueferry.palettes.palette",
    "Picture": "hueferry.picture",
    "SolverError": "hueferry.errors",
    "apply": "hueferry.api",
    "cost": "hueferry.api",
    "fit": "hueferry.api",
    "match": "hueferry.api",
    "palette": "hueferry.api",
    "read": "hueferry.api",
    "report": "hueferry.api",
    "write": "hueferry.api",
}

__all__ = [
    "Cost",
    "Fit",
    "HueferryError",
    "InputError",
    "Palette",
    "Picture",
    "SolverError",
    "__version__",
    "apply",
    "cost",
    "fit",
    "match",
    "palette",
    "read",
    "report",
    "write",
]


def __getattr__(name: str) -> object:
    """Load a verb or a type when it is first asked for."""
    if name not in _HOMES:
        raise AttributeError(f"module 'hueferry' has no attribute {name!r}")
    value: object = getattr(import_module(_HOMES[name]), name)
    return value
