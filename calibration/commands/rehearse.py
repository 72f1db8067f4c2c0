"""``midfringe rehearse``: a whole session on a simulated bench, compared with the truth."""

import os
import sys
from pathlib import Path
from typing import TYPE_CHECKING, Self

import click

from metro.bench import Bench
from metro.extras import require
from metro.options import bench_options, command, distrust, is_quiet, output_options
from metro.output import table, to_json

if TYPE_CHECKING:
    from calibration.rehearsal import Rehearsal
    from calibration.trial_bench import TrialBench

__all__ = ["rehearse"]


@command(example="midfringe rehearse --seed 7 --out rehearsal")
@click.option(
    "--seed",
    type=click.IntRange(min=0),
    default=1,
    show_default=True,
    help="Seed of the truth and of all noise.",
)
@click.option(
    "--trials",
    type=click.IntRange(min=1),
    help="Play this many sessions in memory, seeds counted up from --seed, and print coverage, "
    "distrusted sessions and how near each u comes to the least that the noise allows.",
)
@click.option(
    "--trial-bench",
    "kinds",
    multiple=True,
    metavar="NAME",
    help="With --trials: good, poor-contrast, clipped, drifting, mains-ridden, short, 8-bit or all. "
    "Repeatable.  [default: good]",
)
@click.option(
    "--plan", "plan_file", metavar="FILE", help="Drives and duration from `midfringe plan`."
)
@bench_options
@output_options("json", "overwrite")
@click.option("--out", metavar="FOLDER", help="Where the files stay.  [default: rehearsal]")
def rehearse(
    bench: Bench,
    seed: int,
    trials: int | None,
    kinds: tuple[str, ...],
    plan_file: str | None,
    out: str | None,
    as_json: bool,
    overwrite: bool,
) -> None:
    """Play a whole session on a simulated bench, through a real serial port.

    Records dark, pick-up, single arms, scans and lines on both slopes, calibrates, converts, and
    compares with the truth, which the analysis never sees. Without --bench a built-in bench is
    played; the folder keeps every file, with a commented bench.toml to start from.
    """
    from calibration.rehearsal import check_rehearsal
    from calibration.rehearsal import rehearse as play
    from calibration.rehearsal_folder import (
        comparison_document,
        leave,
        prepare,
        rehearsal_bench,
        with_lines,
    )
    from calibration.rehearsal_script import LINES_S, planned, session_steps

    if kinds and trials is None:
        raise click.UsageError("--trial-bench goes with --trials, got no --trials")
    chosen = _chosen(kinds)
    played, text = rehearsal_bench(bench)
    lines_s = LINES_S
    if plan_file is not None:
        played, lines_s = planned(played, plan_file)
        text = with_lines(text, played.lines)
    check_rehearsal(played, seed, lines_s)  # before anything is written
    if trials is not None:
        if out is not None:
            raise click.UsageError("--out goes with one session; --trials leaves no files")
        _run_trials(played, chosen, lines_s, seed, trials, as_json=as_json)
        return
    for module, what in (("matplotlib", "the session's page"), ("scipy", "its spectrum")):
        require(module, "bench", what)
    folder = Path(out or "rehearsal")
    prepare(folder, overwrite=overwrite)
    with _progress(len(session_steps(played)) + 2) as step:
        result = play(played, seed, folder, lines_s=lines_s, progress=step)
    document = comparison_document(result) | {"files": leave(result, folder, text)}
    click.echo(to_json(document) if as_json else _text(result, folder))
    if not result.calibration.is_trustworthy:
        distrust(result.calibration.all_reasons)


def _chosen(names: tuple[str, ...]) -> "list[TrialBench]":
    from calibration.trial_bench import TRIAL_BENCHES

    unknown = next((name for name in names if name not in {*TRIAL_BENCHES, "all"}), None)
    if unknown is not None:
        known = ", ".join(TRIAL_BENCHES)
        raise click.UsageError(f"--trial-bench must be one of {known} or all, got {unknown!r}")
    wanted = TRIAL_BENCHES if "all" in names else dict.fromkeys(names or ("good",))
    return [TRIAL_BENCHES[name] for name in wanted]


def _run_trials(
    bench: Bench,
    kinds: "list[TrialBench]",
    lines_s: float,
    seed: int,
    trials: int,
    *,
    as_json: bool,
) -> None:
    from calibration.coverage import trials_document, trials_text
    from calibration.trial_bench import NOT_MODELLED
    from calibration.trials import play_trials

    seeds, processes = range(seed, seed + trials), min(trials, os.cpu_count() or 1)
    played = {}
    with _progress(trials * len(kinds)) as step:
        for kind in kinds:
            sessions = play_trials(
                bench, seeds, kind=kind, lines_s=lines_s, processes=processes, progress=step
            )
            played[kind.name] = list(sessions)
    if as_json:
        click.echo(to_json({"seed": seed, "trials": trials} | trials_document(played)))
        return
    parts = [trials_text(kind, played[kind.name]) for kind in kinds]
    click.echo("\n\n".join([*parts, "not modelled: " + "; ".join(NOT_MODELLED)]))


class _progress:  # noqa: N801  # used as a function: with _progress(12) as step
    """A progress bar on a terminal, nothing elsewhere; ``step(text)`` moves it on."""

    def __init__(self, length: int) -> None:
        hidden = is_quiet() or not sys.stderr.isatty()
        self._bar = click.progressbar(
            length=length,
            label="session",
            file=sys.stderr,
            hidden=hidden,
            item_show_func=lambda text: text or "",
        )

    def __enter__(self) -> Self:
        self._bar.__enter__()
        return self

    def __exit__(self, *error: object) -> None:
        self._bar.__exit__(None, None, None)

    def __call__(self, text: str) -> None:
        self._bar.update(1, text)


def _text(result: "Rehearsal", folder: Path) -> str:
    from metro.display import show

    rows = [
        [
            c.name,
            show(c.truth, c.measured.unit, 6),
            show(float(c.measured.magnitude), c.measured.unit, 6),
            show(float(c.measured.expanded().magnitude), c.measured.unit, 2),
            "yes" if c.inside_95 else "no",
        ]
        for c in result.comparisons
    ]
    header = ["quantity", "truth", "measured", "U (95 %)", "truth inside"]
    inside = sum(c.inside_95 for c in result.comparisons)
    return "\n".join(
        [
            table(rows, header=header),
            "",
            (
                f"{inside} of {len(rows)} true values lie inside their 95 % interval "
                "(one in twenty is expected outside; "
                "all lines share the drive reading, so they miss together)"
            ),
            f"all files of the session, with a page (session.png) and a bench.toml: {folder}",
        ]
    )
