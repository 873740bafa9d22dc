"""Whatever is sent to the workbench: an answer in words, never an exception, never markup or data that were not meant.

Coverage-guided runs of minutes are in `tests/benchmarks/fuzz.py http`; these are the short ones of every day.
"""

from __future__ import annotations

from collections.abc import Iterator
from pathlib import Path

import pytest
from http_surface import GOOD, Surface, check_answer, choose_request, fresh_surface, make_folder, request_of
from hypothesis import given, settings
from hypothesis import strategies as st

from tests.builders import at_most


class Drawn:
    """Choices of hypothesis."""

    def __init__(self, draw: st.DrawFn) -> None:
        self._draw = draw

    def below(self, limit: int) -> int:
        return self._draw(st.integers(0, limit - 1))

    def text(self) -> str:
        return self._draw(st.text(max_size=20))

    def data(self) -> bytes:
        return self._draw(st.binary(max_size=60))


@pytest.fixture(scope="module")
def made(tmp_path_factory: pytest.TempPathFactory) -> Path:
    folder = tmp_path_factory.mktemp("surface") / "made"
    make_folder(folder)
    return folder


@pytest.fixture(scope="module")
def surface(made: Path, tmp_path_factory: pytest.TempPathFactory) -> Iterator[Surface]:
    with fresh_surface(made, tmp_path_factory.mktemp("surface") / "attacked") as opened:
        yield opened


@settings(max_examples=150)
@given(data=st.data())
def test_any_request_is_answered_in_words(surface: Surface, data: st.DataObject) -> None:
    asked = choose_request(surface, Drawn(data.draw))
    with at_most(seconds=2.0):
        answer = surface.ask(asked)
    check_answer(surface, asked, answer)


@pytest.mark.parametrize("prefix", ["", "/api"])
def test_the_requests_that_are_bent_are_accepted_as_they_are(made: Path, tmp_path: Path, prefix: str) -> None:
    """Otherwise the test above would only see refusals."""
    with fresh_surface(made, tmp_path / "x") as opened:
        known = [route for route in opened.routes if route.method == "POST" and route.path.startswith(f"{prefix}/")]
        assert set(GOOD) <= {route.path.removeprefix("/api") for route in opened.routes}
        for route in known:
            if route.path == "/nowhere" or route.path.startswith(("/open", "/static", "/sign-out")):
                continue
            if not prefix and route.path.startswith("/api"):
                continue
            fields = {item.name: "1" for item in route.fields if item.place == "path"}
            asked = request_of(opened, route, fields | dict(GOOD.get(route.path.removeprefix("/api"), {})))
            answer = opened.ask(asked)
            check_answer(opened, asked, answer)
            assert answer.status == (201 if prefix else 303), (route, answer.text)
