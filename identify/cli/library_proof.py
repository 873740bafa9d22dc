"""``ionwitness library …``: sign the state a library is in, and check such a statement later."""

from __future__ import annotations

from pathlib import Path

import click

from identify.cli.options import FILE, WHO, now, say

PASSPHRASE = click.option("--passphrase", is_flag=True, help="Ask for the passphrase of the key.")


def ask_passphrase(is_wanted: bool, twice: bool = False) -> str:
    """The passphrase typed by the user; empty when none is wanted.

    Parameters
    ----------
    is_wanted : bool
    twice : bool
        Whether it must be typed again.

    Returns
    -------
    str
    """
    if not is_wanted:
        return ""
    return str(click.prompt("Passphrase", hide_input=True, confirmation_prompt=twice, err=True))


@click.command("create-key")
@click.argument("key", metavar="KEYFILE", type=FILE)
@PASSPHRASE
def create_key(key: Path, passphrase: bool) -> None:
    """Write a new signing key (Ed25519) to KEYFILE, for its owner only, and show the public key."""
    from identify.library.sign import create_signing_key

    public = create_signing_key(key, passphrase=ask_passphrase(passphrase, twice=True))
    say(f"{key}: keep it secret")
    say(f"public key {public}: give it to whoever checks your signatures")


@click.command()
@click.argument("path", metavar="LIB", type=FILE)
@click.argument("target", metavar="SIGNED", type=FILE)
@click.option("--key", required=True, type=FILE, help="Your signing key (see `library create-key`).")
@PASSPHRASE
@WHO
def sign(path: Path, target: Path, key: Path, passphrase: bool, who: str) -> None:
    """Write a signed statement of the state of LIB to SIGNED; a copy elsewhere proves that state later."""
    from identify.library.sign import sign_head
    from identify.library.store import open_library

    with open_library(path) as opened:
        found = sign_head(opened, key, target, passphrase=ask_passphrase(passphrase), who=who, when=now())
    say(f"{target}: event {found.event}, fingerprint {found.fingerprint}")
    say(f"public key {found.public_key}")


@click.command("check-signed")
@click.argument("path", metavar="LIB", type=FILE)
@click.argument("signed", metavar="SIGNED", type=FILE)
@click.option("--public-key", default="", help="Key that must have signed.")
def check_signed(path: Path, signed: Path, public_key: str) -> int:
    """Check that LIB still contains the state a signed statement vouches for; see also `library verify`."""
    from identify.library.sign import check_head
    from identify.library.store import open_library

    with open_library(path) as opened:
        found = check_head(opened, signed, public_key=public_key)
    say(f"{'agrees' if found.agrees else 'DOES NOT AGREE'}: {found.reason}")
    say(f"signed {found.signed_at} by {found.signed_by}, events since: {found.n_events_since:,}")
    if not public_key:
        say(f"public key {found.public_key}: compare it with the one you know")
    return 0 if found.agrees else 4
