"""Options that several commands share."""

from __future__ import annotations

from pathlib import Path
from typing import Annotated

import typer

from hueferry.fitting.settings import Aim, Only
from hueferry.maps.method import Method

Pictures = Annotated[list[Path], typer.Argument(help="Pictures and folders of pictures.", metavar="PICTURE|FOLDER...")]
To = Annotated[
    list[Path] | None,
    typer.Option("--to", help="What the pictures are brought towards; may be given again.", metavar="REF"),
]
Out = Annotated[Path, typer.Option("--out", help="Folder for the results; nothing is written outside it.")]
AimOption = Annotated[
    Aim,
    typer.Option(
        "--aim",
        help="agree: remove differences of light and camera only. adopt: take on the reference's palette fully.",
    ),
]
MethodOption = Annotated[
    str, typer.Option("--method", help="auto, " + ", ".join(method.value for method in Method) + ".", metavar="NAME")
]
Strength = Annotated[float, typer.Option("--strength", help="Share of the way to go.", min=0.0, max=1.0)]
OnlyOption = Annotated[Only | None, typer.Option("--only", help="Correct tone or chroma alone.")]
KeepNeutrals = Annotated[bool, typer.Option("--keep-neutrals", help="Leave grays without colour.")]
Hold = Annotated[
    Path | None,
    typer.Option(
        "--hold",
        help="Picture the size of the inputs: where it is white, colours must stay.",
        metavar="MASK",
    ),
]
MaxGain = Annotated[
    float | None,
    typer.Option("--max-gain", help="Largest stretch of code values (2.5 for 8 bit, 4 for deeper).", min=1.0),
]
Seed = Annotated[int, typer.Option("--seed", help="Same seed, same bytes.")]
Layout = Annotated[str, typer.Option("--layout", help="Of slides: ome (SubIFDs), flat (pages) or zarr.")]
Packing = Annotated[str, typer.Option("--packing", help="Of slides: auto, jpeg, deflate or zstd.")]
Json = Annotated[bool, typer.Option("--json", help="Print the result as JSON.")]
Quiet = Annotated[bool, typer.Option("--quiet", help="Print nothing but the result.")]
Workers = Annotated[
    int | None,
    typer.Option("--workers", help="Pictures done at a time; chosen by cores and free memory if not given.", min=1),
]
ClusterAddress = Annotated[
    str | None,
    typer.Option("--cluster", help="Let the Dask workers of this scheduler do it.", metavar="ADDRESS"),
]
TlsCa = Annotated[Path | None, typer.Option("--tls-ca", help="Certificates of the cluster's authority (PEM).")]
TlsCertificate = Annotated[Path | None, typer.Option("--tls-certificate", help="Our certificate (PEM).")]
TlsKey = Annotated[Path | None, typer.Option("--tls-key", help="Its private key (PEM).")]
OneByOne = Annotated[
    bool, typer.Option("--one-by-one", help="Fit each picture by itself, not three or more as one series.")
]
TimeLapse = Annotated[
    bool, typer.Option("--time-lapse", help="Keep what changes slowly over the series; take out what flickers.")
]
Watch = Annotated[bool, typer.Option("--watch", help="Go on with pictures as they arrive, until stopped.")]
DryRun = Annotated[bool, typer.Option("--dry-run", help="Print what would be done, and write nothing.")]
Overwrite = Annotated[bool, typer.Option("--overwrite", help="Replace files of the same names.")]


def parse_method(name: str) -> Method | None:
    """Return the named method, or None for `auto`.

    Raises:
        typer.BadParameter: there is no such method.
    """
    if name == "auto":
        return None
    try:
        return Method(name)
    except ValueError as error:
        choices = ", ".join(["auto", *(method.value for method in Method)])
        raise typer.BadParameter(f"there is no method {name!r}; choose one of {choices}") from error
