"""Option values with units."""

from typing import TYPE_CHECKING, Any

import click

from metro.errors import MetroError
from metro.units import si

__all__ = ["ValueType", "option_name"]

if TYPE_CHECKING:
    _ParamType = click.ParamType[Any]
else:
    _ParamType = click.ParamType  # not generic before click 8.2


class ValueType(_ParamType):
    """An option value with a unit, returned as a float in SI.

    Parameters
    ----------
    unit : str
        The SI unit, such as ``"m"``.
    name : str, optional
        What help shows for the value.
    minimum, maximum : float, optional
        Closed bounds, in ``unit``.
    above, below : float, optional
        Open bounds, in ``unit``.
    """

    def __init__(
        self,
        unit: str,
        name: str = "VALUE",
        *,
        minimum: float | None = None,
        maximum: float | None = None,
        above: float | None = None,
        below: float | None = None,
    ) -> None:
        self.unit = unit
        self.name = name
        self.minimum, self.maximum = minimum, maximum
        self.above, self.below = above, below

    def convert(
        self,
        value: Any,  # noqa: ANN401  # text from the command line, or a default
        param: click.Parameter | None,
        ctx: click.Context | None,  # noqa: ARG002  # click's signature
    ) -> Any:  # noqa: ANN401  # a float
        """Return the value in SI.

        Parameters
        ----------
        value : str or float
            As given; a float is a default already in SI.
        param : click.Parameter, optional
            The option, for its name.
        ctx : click.Context, optional
            Not used.

        Returns
        -------
        float
            In the unit of this type.

        Raises
        ------
        MetroError
            If it is no such value.
        """
        if isinstance(value, float):
            return value
        name = option_name(param)
        if isinstance(value, str) and value.startswith("--"):
            raise MetroError(f"{name} needs a value, got the option {value!r}")
        return si(
            value,
            name,
            self.unit,
            minimum=self.minimum,
            maximum=self.maximum,
            above=self.above,
            below=self.below,
        )


def option_name(param: click.Parameter | None) -> str:
    """Return what messages call a parameter.

    Parameters
    ----------
    param : click.Parameter, optional
        An option or an argument.

    Returns
    -------
    str
        Such as ``"--arm"``.
    """
    if param is None:
        return "value"
    if isinstance(param, click.Option):
        return max(param.opts, key=len)
    return (param.name or "value").upper()
