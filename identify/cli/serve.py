"""``ionwitness serve``: the workbench in a browser."""

from __future__ import annotations

from pathlib import Path

import click

from identify.cli.options import FILE, SETTINGS, current_user, now, read_settings
from identify.errors import UsageError


@click.command()
@click.option(
    "--library", "libraries", multiple=True, required=True, type=FILE, help="Library to work with; repeatable."
)
@click.option("--case", "case_path", type=FILE, help="Case file (default: beside the first library).")
@click.option("--port", type=click.IntRange(0, 65535), default=8377, show_default=True, help="0 takes any free port.")
@SETTINGS
@click.option("--browser/--no-browser", default=False, help="Open the link in a browser.")
@click.option("--address", default="127.0.0.1", show_default=True, help="Address to serve on.")
@click.option("--name", "names", multiple=True, help="Name by which other computers reach this one; repeatable.")
@click.option("--allow-network", is_flag=True, help="Allow an address that other computers can reach.")
@click.option(
    "--add-person",
    "people",
    multiple=True,
    metavar="NAME:ROLE",
    help="Let somebody sign in (analyst, reviewer), then end.",
)
def serve(
    libraries: tuple[Path, ...],
    case_path: Path | None,
    port: int,
    settings_path: Path | None,
    browser: bool,
    address: str,
    names: tuple[str, ...],
    allow_network: bool,
    people: tuple[str, ...],
) -> int:
    """Open the workbench: a local page for the whole job."""
    from identify.settings import resolve

    _check_packages()
    case_path = case_path or libraries[0].with_suffix(".ioncase")
    if people:
        return _add_people(case_path, people)
    from identify.workbench.server import Address, bind, open_workbench
    from identify.workbench.server import serve as run_server

    _check_address(Address(address, port).is_loopback, address, allow_network)
    settings = resolve(read_settings(settings_path), where=str(settings_path or "settings"))
    listener = bind(address, port)
    bound = Address(address, listener.getsockname()[1], names)
    with listener, open_workbench(libraries, case_path, settings, bound, local_user=current_user()) as opened:
        if opened.link:
            click.echo(f"Workbench: {opened.link}\nThe link works once. Stop with Ctrl-C.")
        else:
            click.echo(f"Workbench on {', '.join(bound.hosts)}: people sign in by name. Stop with Ctrl-C.")
        if browser and opened.link:
            click.launch(opened.link)
        run_server(opened, listener)
    return 0


def _check_packages() -> None:
    from importlib.util import find_spec

    missing = [name for name in ("fastapi", "uvicorn", "multipart", "argon2", "jinja2") if find_spec(name) is None]
    if missing:
        raise UsageError(
            "workbench", found=f"no {', '.join(missing)}", expected="the packages of the workbench",
            hint="Install them with `pip install 'ionwitness[workbench]'` (in the source folder: '.[workbench]').",
        )  # fmt: skip


def _check_address(is_loopback: bool, address: str, is_allowed: bool) -> None:
    if not is_loopback and not is_allowed:
        raise UsageError(
            "--address", found=address, expected="a loopback address",
            hint="Add --allow-network to serve others: they sign in by name and password, without encryption of its own.",
        )  # fmt: skip


def _add_people(case_path: Path, people: tuple[str, ...]) -> int:
    from identify.library.events import format_time
    from identify.workbench.case_file import open_case
    from identify.workbench.people import set_person

    with open_case(case_path) as case:
        for text in people:
            name, _, role = text.rpartition(":")
            password = click.prompt(f"Password of {name}", hide_input=True, confirmation_prompt=True)
            set_person(case, name, role, password, format_time(now()))
            click.echo(f"{name} may sign in as {role}.")
    return 0
