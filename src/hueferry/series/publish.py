"""A verified result gets its final name."""

from __future__ import annotations

import os
from pathlib import Path

from hueferry.errors import OutputError


def publish(stage: Path, output: Path, *, replace: bool) -> None:
    """Move a verified file to its final name on the same disk, in one step; folders are made as needed.

    Without `replace` the name is taken by a hard link, which fails if somebody else took it meanwhile.

    Raises:
        OutputError: the name is taken, or nothing can be written there.
    """
    try:
        output.parent.mkdir(parents=True, exist_ok=True)
        if replace:
            stage.replace(output)
        else:
            _take(stage, output)
    except FileExistsError as error:
        raise OutputError(output, "this was created meanwhile by somebody else; nothing was written") from error
    except OSError as error:
        raise OutputError(output, f"nothing can be written here: {error.strerror or error}") from error


def _take(stage: Path, output: Path) -> None:
    try:
        os.link(stage, output)
    except FileExistsError:
        raise
    except OSError:
        # A file system without hard links: a look has to do.
        if output.exists():
            raise FileExistsError(output) from None
        stage.replace(output)
    else:
        stage.unlink()
