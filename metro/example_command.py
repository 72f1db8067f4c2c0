"""Commands whose help sets the bench's options apart and ends with one example to run."""

from collections.abc import Callable
from typing import Any

import click

from metro.bench_keys import OPTIONS

__all__ = ["ExampleCommand", "command"]


class ExampleCommand(click.Command):
    """A command whose help ends with the bench's options apart and one example to run.

    Parameters
    ----------
    *args : object
        As click.Command takes them.
    example : str
        One line that can be run.
    **kwargs : object
        As click.Command takes them.
    """

    def __init__(self, *args: Any, example: str = "", **kwargs: Any) -> None:  # noqa: ANN401  # click's own
        super().__init__(*args, **kwargs)
        self.example = example

    def format_options(self, ctx: click.Context, formatter: click.HelpFormatter) -> None:
        """Write the options, those of the bench in a section of their own.

        Parameters
        ----------
        ctx : click.Context
            Of this command.
        formatter : click.HelpFormatter
            Takes the text.
        """
        bench = {"bench", *(name.replace("-", "_") for name in OPTIONS)}
        own: list[tuple[str, str]] = []
        shared: list[tuple[str, str]] = []
        has_bench = any(param.name == "bench_file" for param in self.params)
        for param in self.get_params(ctx):
            record = param.get_help_record(ctx)
            if record is not None:
                of_bench = has_bench and param.name in bench | {"bench_file"}
                (shared if of_bench else own).append(record)
        for title, records in (("Options", own), ("The bench", shared)):
            if records:
                with formatter.section(title):
                    formatter.write_dl(records)

    def format_epilog(self, ctx: click.Context, formatter: click.HelpFormatter) -> None:
        """Write the example, unwrapped so that it can be copied.

        Parameters
        ----------
        ctx : click.Context
            Of this command.
        formatter : click.HelpFormatter
            Takes the text.
        """
        super().format_epilog(ctx, formatter)
        if self.example:
            formatter.write(f"\nExample:\n  {self.example}\n")


def command(example: str, **settings: Any) -> Callable[[Callable[..., Any]], click.Command]:  # noqa: ANN401  # click's own
    """Return the decorator that makes a function a command with an example in its help.

    Parameters
    ----------
    example : str
        One line that can be run.
    **settings : object
        As click.command takes them.

    Returns
    -------
    callable
        The decorator.
    """
    return click.command(
        cls=ExampleCommand,
        example=example,
        context_settings={"help_option_names": ["-h", "--help"], "max_content_width": 100},
        **settings,
    )
