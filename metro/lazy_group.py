"""The group of commands, found by the distribution's entry points and loaded when called."""

from difflib import get_close_matches
from functools import cached_property
from importlib import import_module
from importlib.metadata import EntryPoint, distribution

import click

__all__ = ["PROGRAM", "LazyGroup"]

PROGRAM = "midfringe"
GROUP = "midfringe.commands"
# The order of the work, not of the alphabet; commands named nowhere here follow.
ORDER = (
    *("expect", "air", "plan", "record", "inspect", "export", "fringe", "lines", "calibrate"),
    *("convert", "spectrum", "ledger", "log", "report", "watch", "emit", "rehearse"),
)


class LazyGroup(click.Group):
    """A group whose commands are the distribution's entry points, loaded when called.

    An entry point's name is ``"name: one-line help"``, so that help loads no command.
    """

    @cached_property
    def found(self) -> dict[str, tuple[str, EntryPoint]]:
        """The one-line help and entry point of every command, by name, in the order of the work."""
        found = {}
        for entry in distribution(PROGRAM).entry_points.select(group=GROUP):
            name, _, line = entry.name.partition(":")
            found[name.strip()] = (line.strip(), entry)
        order = {name: place for place, name in enumerate(ORDER)}
        names = sorted(found, key=lambda name: (order.get(name, len(ORDER)), name))
        return {name: found[name] for name in names}

    def list_commands(self, ctx: click.Context) -> list[str]:  # noqa: ARG002  # click's signature
        """Return the names of the commands.

        Parameters
        ----------
        ctx : click.Context
            Not used.

        Returns
        -------
        list of str
            In the order of the work.
        """
        return list(self.found)

    def get_command(self, ctx: click.Context, cmd_name: str) -> click.Command | None:  # noqa: ARG002  # click's signature
        """Return a command, its module loaded now.

        Parameters
        ----------
        ctx : click.Context
            Not used.
        cmd_name : str
            The command's name.

        Returns
        -------
        click.Command or None
            None where there is no such command.
        """
        if cmd_name not in self.found:
            return None
        _, entry = self.found[cmd_name]
        command: click.Command = getattr(import_module(entry.module), entry.attr)
        return command

    def resolve_command(
        self, ctx: click.Context, args: list[str]
    ) -> tuple[str | None, click.Command | None, list[str]]:
        """Return the command that the arguments name.

        Parameters
        ----------
        ctx : click.Context
            Of the group.
        args : list of str
            The command's name and its arguments.

        Returns
        -------
        tuple of (str, click.Command, list of str)
            Name, command, arguments.

        Raises
        ------
        click.UsageError
            If there is no such command; the nearest is named.
        """
        if args and args[0] not in self.found:
            if args[0].startswith("-"):
                raise click.NoSuchOption(args[0], ctx=ctx)
            close = get_close_matches(args[0], list(self.found), 1, 0.5)
            hint = f"; the nearest is {close[0]!r}" if close else ""
            raise click.UsageError(f"unknown command {args[0]!r}{hint}", ctx)
        return super().resolve_command(ctx, args)

    def format_commands(self, ctx: click.Context, formatter: click.HelpFormatter) -> None:  # noqa: ARG002  # click's signature
        """Write the list of commands without loading one.

        Parameters
        ----------
        ctx : click.Context
            Not used.
        formatter : click.HelpFormatter
            Takes the text.
        """
        with formatter.section("Commands"):
            formatter.write_dl([(name, line) for name, (line, _) in self.found.items()])
