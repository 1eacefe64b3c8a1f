"""`hueferry match`: bring pictures together."""

from __future__ import annotations

from collections.abc import Sequence
from typing import TYPE_CHECKING

import typer

from hueferry.cli import options
from hueferry.cli.terminal import remark, show_json, show_table
from hueferry.fitting.settings import Aim, Settings

if TYPE_CHECKING:
    from hueferry.record.record import Entry, Record
    from hueferry.series.match import MatchOrder

SOME_FAILED = 1
NOTHING_WRITTEN = 2

LOOK_EVERY = 1.0
"""Seconds between two looks at watched folders."""


def match(
    pictures: options.Pictures,
    out: options.Out,
    *,
    to: options.To = None,
    aim: options.AimOption = Aim.AGREE,
    method: options.MethodOption = "auto",
    strength: options.Strength = 1.0,
    only: options.OnlyOption = None,
    keep_neutrals: options.KeepNeutrals = False,
    hold: options.Hold = None,
    max_gain: options.MaxGain = None,
    seed: options.Seed = 0,
    workers: options.Workers = None,
    one_by_one: options.OneByOne = False,
    time_lapse: options.TimeLapse = False,
    cluster: options.ClusterAddress = None,
    tls_ca: options.TlsCa = None,
    tls_certificate: options.TlsCertificate = None,
    tls_key: options.TlsKey = None,
    watch: options.Watch = False,
    dry_run: options.DryRun = False,
    json: options.Json = False,
    quiet: options.Quiet = False,
    overwrite: options.Overwrite = False,
) -> None:
    """Bring pictures together in colour: towards references, or towards their own common palette."""
    chosen = options.parse_method(method)

    from hueferry.cli.progress import Progress
    from hueferry.jobs import match_files
    from hueferry.series.cluster import Cluster
    from hueferry.series.match import MatchOrder

    settings = Settings(
        aim=aim,
        method=chosen,
        strength=strength,
        only=only,
        keep_neutrals=keep_neutrals,
        max_gain=max_gain,
        seed=seed,
    )
    order = MatchOrder(
        inputs=pictures,
        to=to or (),
        out=out,
        settings=settings,
        hold=hold,
        overwrite=overwrite,
        workers=workers,
        joint=not (one_by_one or watch),
        time_lapse=time_lapse,
        cluster=None if cluster is None else Cluster(cluster, tls_ca, tls_certificate, tls_key),
    )
    if dry_run:
        show_plan(order, as_json=json)
        return
    if watch:
        watch_folders(order, quiet=quiet)
        return
    progress = Progress()
    record = match_files(order, on_plan=None if quiet else progress.begin, on_done=None if quiet else progress.step)
    if json:
        show_json(record.as_dict())
    else:
        show_costs(record)
    if record.failures:
        raise typer.Exit(SOME_FAILED if record.entries else NOTHING_WRITTEN)


def watch_folders(order: MatchOrder, *, quiet: bool) -> None:
    """Do pictures as they arrive, until a signal says stop."""
    from hueferry.cli.progress import Progress
    from hueferry.cli.stopping import stop_on_signal
    from hueferry.jobs import match_files
    from hueferry.series.watch import Patience
    from hueferry.series.watch import watch as watch_order

    progress = Progress()

    def run(part: MatchOrder) -> None:
        match_files(part, on_done=None if quiet else progress.step)

    with stop_on_signal() as stop:
        if not quiet:
            remark(f"watching {', '.join(str(path) for path in order.inputs)}; stop with Ctrl+C")
        watch_order(order, run, patience=Patience(lambda: not stop.wait(LOOK_EVERY)))
    if not quiet:
        remark(f"stopped; {order.out} is complete as far as pictures arrived")


def show_costs(record: Record) -> None:
    """Print what every picture cost before and after, and where it went."""
    rows = [_row(entry) for entry in record.entries]
    if rows:
        title = f"Transport cost, {record.sentences[0]} (root mean square, ΔE*ab, D50)"
        for sentence in record.sentences[1:]:
            remark(sentence)
        show_table(title, ("picture", "before", "after", "moved", "largest gain", "evidence"), rows)
    if record.failures:
        count = len(record.failures)
        remark(f"{count} of {count + len(record.entries)} pictures failed; the rest is done")


def show_plan(order: MatchOrder, *, as_json: bool) -> None:
    """Print what a run would do: every picture, where it would go, and what stands in the way.

    Raises:
        typer.Exit: the run could not be done as asked.
    """
    from hueferry.series.match import plan_match

    plan = plan_match(order)
    if as_json:
        show_json(plan.as_dict())
    else:
        rows = [(step.fact.path, step.output, step.state) for step in plan.steps]
        show_table(f"What would be done in {order.out}", ("picture", "goes to", "state"), rows, left=(0, 1, 2))
        for sentence in plan.sentences:
            remark(sentence)
    if plan.taken and not order.overwrite:
        raise typer.Exit(NOTHING_WRITTEN)


def _row(entry: Entry) -> Sequence[str]:
    numbers = entry.numbers
    return (
        entry.source.path.rsplit("/", 1)[-1],
        f"{numbers['cost_before']['w2']:.2f}",
        f"{numbers['cost_after']['w2']:.2f}",
        f"{numbers['moved']:.2f}",
        f"{numbers['certificate']['largest_gain']:.2f}",
        str(numbers["evidence"]["basis"]),
    )
