"""The ``molwright`` command."""

from __future__ import annotations

import os

# One BLAS thread a process: more of them, in several workers, get in each other's way and
# cost a factor of ten and more. NumPy reads this when it is imported, so it comes first.
os.environ["OPENBLAS_NUM_THREADS"] = os.environ["OMP_NUM_THREADS"] = "1"
# What the web server would read from the environment beside its settings, some of it on import.
os.environ.pop("FORWARDED_ALLOW_IPS", None)
os.environ.pop("PORT", None)
os.environ.pop("SCRIPT_NAME", None)
os.environ.pop("SENDFILE", None)
os.environ.pop("WEB_CONCURRENCY", None)

import functools
import itertools
from pathlib import Path
from typing import Any

import click

from service import __version__, logs, server

_option = functools.partial(click.option, show_envvar=True, show_default=True)


@click.group(context_settings={"help_option_names": ["-h", "--help"]})
@click.version_option(__version__, message="%(prog)s %(version)s")
def main() -> None:
    """Keep the mole account of a plant's reactors, as a REST service.

    Results are advisory: screening calculations, not to be wired to safety
    functions. Follow local codes and licensed practice.
    """


# The command's own prefix: without it the variables would be MOLWRIGHT_SERVE_PORT and so on.
@main.command(context_settings={"auto_envvar_prefix": "MOLWRIGHT"})
@_option("--host", default="127.0.0.1", help="Address to listen on; 0.0.0.0 for every one.")
@_option("--port", type=click.IntRange(0, 65535), default=8410, help="0 takes a free one.")
@_option(
    "--workers",
    type=click.IntRange(min=1),
    default=server.cores,
    show_default="the cores at hand",
    help="Processes that compute.",
)
@_option(
    "--threads",
    type=click.IntRange(min=1),
    default=16,
    help="Requests that a process holds at once; 32 where no buffering proxy stands in front.",
)
@_option(
    "--log-level",
    type=click.Choice(["debug", "info", "warning", "error", "critical"], case_sensitive=False),
    default="info",
    help="Least severe messages to log; the line for each request is always written.",
)
@_option(
    "--max-body",
    type=click.IntRange(min=1),
    default=16 * 2**20,
    metavar="BYTES",
    help="Largest request body taken.",
)
@_option(
    "--graceful-timeout",
    type=click.IntRange(min=1),
    default=30,
    metavar="SECONDS",
    help="How long a stop waits for requests under way.",
)
def serve(**chosen: Any) -> None:
    """Serve until SIGTERM or Ctrl-C; SIGHUP replaces the processes one by one.

    The log goes to standard output, one JSON object a line; requests to paste
    go to standard error. Before SIGTERM, take the service out of the load
    balancer. Ctrl-C drops what is under way.
    """
    settings = server.Settings(**chosen)
    fault = server.address_fault(settings.host, settings.port)
    if fault:
        raise click.ClickException(fault)
    logs.configure(settings.log_level)
    server.Application(settings, _greet).run()


def banner(address: str) -> str:
    """Return what is said on standard error once the server listens, for whoever looks."""
    from schemas.examples import paste

    return f"\nMolwright listens on {address}. Try:\n\n{paste(address)}"


def _greet(address: str) -> None:
    logs.logger().info("listening", address=address)
    # The log has standard output to itself.
    click.echo(banner(address), err=True)


@main.command()
@click.option("--check", "act", flag_value="check", help="Fail if it is not what the code makes.")
@click.option(
    "--write",
    "act",
    flag_value="write",
    help="Replace it, and the answers of its examples, by what the code makes; in a source tree.",
)
def contract(act: str | None) -> None:
    """Print the published contract, an OpenAPI 3.1 document."""
    from schemas.contract import PUBLISHED, openapi_document, published_text, render

    if act is None:
        click.echo(published_text(), nl=False)
        return
    if act == "write":
        _write_contract(Path(str(PUBLISHED)))
        return
    made = render(openapi_document())
    packaged = published_text()
    if made != packaged:
        pairs = itertools.zip_longest(packaged.splitlines(), made.splitlines(), fillvalue=b"(end)")
        at, (was, now) = next((n, pair) for n, pair in enumerate(pairs, 1) if pair[0] != pair[1])
        raise click.ClickException(
            f"the published contract is stale; line {at}:\n"
            f"  published  {was.decode().strip()}\n"
            f"  made       {now.decode().strip()}\n"
            "If the change is meant, run 'molwright contract --write' from the source tree."
        )


def _write_contract(published: Path) -> None:
    from schemas.contract import openapi_document, render
    from service.replay import write_answers

    if not published.parents[2].joinpath("pyproject.toml").exists():
        raise click.ClickException(
            "this is an installed release, whose contract stands; write one in a source tree, with"
            " 'python -m service contract --write'"
        )
    try:
        write_answers()
    except RuntimeError as error:
        raise click.ClickException(str(error)) from None
    published.write_bytes(render(openapi_document()))
