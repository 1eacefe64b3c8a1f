"""`python -m hueferry.samples FOLDER`: render the sample pictures."""

from __future__ import annotations

import sys
from pathlib import Path

from hueferry.samples.photographs import render_samples

if __name__ == "__main__":
    for written in render_samples(Path(sys.argv[1] if len(sys.argv) > 1 else "sample_images")):
        sys.stdout.write(f"{written}\n")
