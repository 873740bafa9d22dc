"""``ionwitness library calibrate``: probabilities that fit this library, from its own replicates."""

from __future__ import annotations

from pathlib import Path

import click

from identify.cli.options import FILE, WHO, WHY, now, read_settings, say, say_event
from identify.cli.progress import progress_bar


@click.command()
@click.argument("path", metavar="LIB", type=FILE)
@click.option(
    "--absent", "absent_share", type=float, default=0.375, show_default=True,
    help="Share of your unknowns whose compound is not in LIB.",
)  # fmt: skip
@click.option("--trial", "is_trial", is_flag=True, help="Only say what would be stored.")
@click.option("--shipped", "is_reset", is_flag=True, help="Go back to the calibration shipped with the program.")
@click.option("--settings", "settings_path", type=FILE, help="TOML file with settings, as for a search.")
@WHO
@WHY
def calibrate(
    path: Path, absent_share: float, is_trial: bool, is_reset: bool, settings_path: Path | None, who: str, why: str
) -> None:
    """Refit the probabilities to LIB: its replicates are played as unknowns, with and without their compound.

    The order of candidates stays as it is. With too few replicates, or when the refitted numbers do no better on compounds held
    out, the shipped calibration stays. What is found is stored in LIB as an event, and results say which calibration they used.
    """
    from identify.pipeline.calibrate import calibrate_library, reset_calibration
    from identify.settings import resolve

    if is_reset:
        say_event(reset_calibration(path, who=who, when=now(), reason=why))
        return
    settings = resolve(read_settings(settings_path), where=str(settings_path or "settings"))
    with progress_bar("Playing replicates") as progress:
        done = calibrate_library(
            path, settings, who=who, when=now(), reason=why, absent_share=absent_share, is_trial=is_trial,
            progress=progress,
        )  # fmt: skip
    say(f"{path}: {done.result.note}")
    if done.event is not None:
        say_event(done.event)
    elif done.result.is_refitted:
        say("Not stored: this was a trial.")
