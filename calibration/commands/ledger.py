"""``midfringe ledger``: calibrations and line results over the years, and whether any drifted."""

import click

from calibration.commands.ledger_add import EXAMPLE, add
from calibration.commands.ledger_chart import chart
from calibration.commands.ledger_check import check
from calibration.commands.ledger_list import list_entries

__all__ = ["ledger"]


class _Group(click.Group):
    """The commands of the ledger, with one example."""

    def format_epilog(
        self,
        ctx: click.Context,  # noqa: ARG002  # click's signature
        formatter: click.HelpFormatter,
    ) -> None:
        formatter.write(f"\nExample:\n  {EXAMPLE}\n")


@click.group(
    cls=_Group,
    no_args_is_help=False,
    context_settings={"help_option_names": ["-h", "--help"], "max_content_width": 100},
)
def ledger() -> None:
    """Keep calibrations and line results; tell whether anything has drifted.

    The ledger is an SQLite file, or a PostgreSQL database for several benches.
    """


ledger.add_command(add, "add")
ledger.add_command(list_entries, "list")
ledger.add_command(chart, "chart")
ledger.add_command(check, "check")
