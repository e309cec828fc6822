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
from collections.abc import Callable
from pathlib import Path
from typing import Any

import click

from service import __version__, configuration, logs, server
from service.configuration import Configuration


@click.group(context_settings={"help_option_names": ["-h", "--help"]})
@click.version_option(__version__, message="%(prog)s %(version)s")
def main() -> None:
    """Keep the mole account of a plant's reactors, as a REST service.

    Results are advisory: screening calculations, not to be wired to safety
    functions. Follow local codes and licensed practice.
    """


def _settings(command: Callable[..., None]) -> Callable[..., None]:
    """Give a command an option for each setting; it is called with the configuration in force."""

    @functools.wraps(command)
    def configured(**options: Any) -> None:
        file = options.pop(configuration.FILE)
        flags = {of.name: options.pop(of.attribute) for of in configuration.DESCRIBED}
        said = {name: text for name, text in flags.items() if text is not None}
        try:
            found = configuration.load(said, os.environ, file)
        except configuration.Faults as faults:
            raise click.UsageError("\n".join(faults.faults)) from None
        command(found, **options)

    for of in reversed(configuration.DESCRIBED):
        how: dict[str, Any] = {"metavar": of.kind.metavar}
        if of.kind.switch:
            how = {"is_flag": True, "flag_value": "true"}
        # Read as text, and together with the other sources: so every fault is told at once.
        option = click.option(f"--{of.name}", type=str, default=None, help=of.help, **how)
        configured = option(configured)
    return click.option(
        f"--{configuration.FILE}",
        metavar="FILE",
        help="TOML file of settings, by the names of the options below."
        f"  [env var: {configuration.PREFIX}{configuration.FILE.upper()}]",
    )(configured)


@main.command()
@_settings
def serve(configured: Configuration) -> None:
    """Serve until SIGTERM or Ctrl-C; SIGHUP replaces the processes one by one.

    The log goes to standard output, one JSON object a line; requests to paste
    go to standard error. Before SIGTERM, take the service out of the load
    balancer. Ctrl-C drops what is under way.

    A flag wins over a variable of the environment, that over the file.
    'molwright config' shows what is in force.
    """
    settings = configured.settings
    fault = server.address_fault(settings.host, settings.port)
    if fault:
        raise click.ClickException(fault)
    logs.configure(settings.log_level)
    for variable in configured.unknown:
        logs.logger().warning("not heeded", variable=variable)
    server.Application(settings, _greet).run()


@main.command()
@_settings
def config(configured: Configuration) -> None:
    """Show the settings in force and where each comes from, as a file that says the same."""
    click.echo(configuration.told(configured), nl=False)


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
