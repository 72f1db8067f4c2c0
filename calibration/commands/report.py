"""``midfringe report``: a calibration as one self-contained page."""

from __future__ import annotations

from pathlib import Path

import click

from metro.options import command, distrust, output_options

__all__ = ["report"]


@command(
    example="midfringe report rehearsal/calibration.json --bench rehearsal/bench.toml --out report.html"
)
@click.argument("calibration_file", metavar="CALIBRATION")
@click.option(
    "--recordings",
    "folder",
    metavar="FOLDER",
    help="Where its recordings lie; where the calibration says, from its own folder, if not given.",
)
@click.option("--bench", "bench_file", metavar="FILE", help="For the noise that is expected.")
@click.option("--title", metavar="TEXT", default="", help="Heading of the page.")
@output_options("out", "json", "overwrite")
def report(
    calibration_file: str,
    folder: str | None,
    bench_file: str | None,
    title: str,
    out: str | None,
    as_json: bool,
    overwrite: bool,
) -> None:
    """Write what was calibrated, how well and from what as one HTML page that prints well."""
    from calibration.desk.evidence import find_evidence
    from calibration.desk.report import report_page
    from calibration.record import load
    from metro.bench import load_bench
    from metro.output import check_writable, to_json, write_whole

    if out is None:
        raise click.UsageError("--out must name the page to write (.html), got none")
    if Path(out).suffix.lower() not in (".html", ".htm"):
        raise click.UsageError(f"--out must end in .html, got {out!r}")
    check_writable(out, overwrite, [calibration_file, bench_file])
    bench = None if bench_file is None else load_bench(bench_file)
    calibration = load(calibration_file)
    beside = Path(calibration_file).parent
    evidence = find_evidence(calibration, folder or beside, follow=folder is None)
    write_whole(out, report_page(calibration, evidence, title, bench), overwrite=overwrite)
    lost = [
        f"{item.role}: {item.file} is {item.state}" for item in evidence if not item.is_unchanged
    ]
    reasons = calibration.all_reasons
    if as_json:
        document = {"file": out, "trustworthy": not reasons, "reasons": reasons, "remarks": lost}
        click.echo(to_json(document))
    else:
        click.echo(f"report: {out}")
        for text in lost:
            click.echo(f"recording {text}", err=True)
    if reasons:
        distrust(reasons)
