"""How long a person waits before anything happens, over the start of a bare interpreter with NumPy."""

from __future__ import annotations

import subprocess
import sys
from collections.abc import Iterator

from bench.timing import Ratio, compare

_HEAVY = ("scipy", "ot", "numba", "cv2", "tifffile", "dask")
_COMMAND = "from hueferry.cli.main import main; main()"


def measure_startup(turns: int) -> Iterator[Ratio]:
    """Compare `hueferry --help` and importing the package with the start of Python, and of Python with NumPy."""
    bare, numpy = _run("-c", "pass"), _run("-c", "import numpy")
    yield compare("hueferry --help, over bare Python", _run("-c", _COMMAND, "--help"), bare, turns=turns)
    yield compare("import hueferry.api, over importing NumPy", _run("-c", "import hueferry.api"), numpy, turns=turns)


def heavy_imports() -> list[str]:
    """Return the heavy packages that importing the verbs loads; there should be none."""
    code = f"import sys, hueferry.api; print(*(n for n in {_HEAVY!r} if n in sys.modules))"
    return subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True).stdout.split()


def _run(*arguments: str) -> object:
    def run() -> None:
        subprocess.run([sys.executable, *arguments], capture_output=True, check=True)

    return run
