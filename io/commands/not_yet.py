"""A command whose name is promised and whose work is still to come: it refuses, and says what to do instead."""

import click


def not_yet(name: str, purpose: str, instead: str) -> click.Command:
    """A command that takes any arguments and ends with exit code 2.

    Parameters
    ----------
    name, purpose : str
    instead : str
        What does the work today, as an imperative.
    """

    @click.command(
        name,
        short_help=f"{purpose} (not yet).",
        help=f"{purpose}. Not yet: it ends with exit code 2 and changes nothing. Instead, {instead}.",
        context_settings={"ignore_unknown_options": True},
    )
    @click.argument("arguments", nargs=-1, type=click.UNPROCESSED)
    def refuse(arguments: tuple[str, ...]) -> int:
        from ...ident.errors import RequestError

        raise RequestError(
            f"`gainwright {name}` is not there yet",
            found=" ".join(("gainwright", name, *arguments)),
            expected="one of: process, inspect, draft",
            advice=instead,
        )

    return refuse
