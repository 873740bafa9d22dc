"""Work done in a process that a test kills: each line printed says what is committed.

python faulty_work.py build|propose|review|merge|write LIBRARY [NAME]
"""

from __future__ import annotations

import sys
from pathlib import Path

sys.path.insert(0, str(Path(__file__).parent))

from library_builders import WHEN, build_random_records, build_record, build_test_library, move

from identify.library import cache
from identify.library.standards import StandardDetails, propose_standard, review_standard
from identify.library.store import open_library
from identify.records import EntryStatus, Identity
from identify.settings import Weighting

PEAKS = {51: 9.0, 65: 7.0, 77: 11.0, 91: 100.0, 105: 25.0, 106: 60.0}


def say(text: str) -> None:
    print(text, flush=True)


def build(path: Path) -> None:
    say("ready")
    for number in range(1000):
        target = path.with_name(f"{path.name}-{number}")
        build_test_library(target, build_random_records(40, seed=number))
        say(target.name)


def propose_and_review(path: Path, name: str) -> None:
    with open_library(path, writable=True, busy_timeout_s=30.0) as library:
        say("ready")
        for number in range(1000):
            record = build_record("x", f"{name} {number}", PEAKS)
            identity = Identity(f"{name} {number}", "C8H10")
            proposal = propose_standard(
                library, record, identity=identity, details=StandardDetails(lot=str(number)), who=name, when=WHEN
            )
            accession = proposal.entry.accession
            say(f"proposed {accession}")
            review_standard(library, accession, accept=True, who=f"not {name}", when=WHEN, reason="fine")
            say(f"accepted {accession}")


def merge(path: Path) -> None:
    cache.MERGE_AT = 1
    say("ready")
    for number in range(1000):
        status = EntryStatus.QUARANTINED if number % 2 else EntryStatus.REFERENCE
        move(path, 1 + number % 5, status)
        with open_library(path) as library:
            cache.load_index(library, Weighting())
        say(f"merged {number}")


if __name__ == "__main__":
    task, where = sys.argv[1], Path(sys.argv[2])
    if task == "build":
        build(where)
    elif task == "propose":
        propose_and_review(where, sys.argv[3])
    else:
        merge(where)
