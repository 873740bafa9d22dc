"""Structure drawings for one page: each compound is drawn once and referred to wherever it is shown."""

from __future__ import annotations

import re
from dataclasses import dataclass, field

from identify.errors import StructureError

WIDTH, HEIGHT = 220, 160
MAX_SMILES = 400
"""Longer ones make drawings nobody can read at this size."""

_PATH = re.compile(r"<path d='([^']*)' ([^>]*?)\s*/>")


@dataclass(slots=True)
class StructureSheet:
    """Drawings asked for so far, as SVG symbols keyed by structure."""

    symbols: dict[str, str] = field(default_factory=dict)
    """Markup of each symbol by its id, in the order first asked for."""
    _ids: dict[str, str] = field(default_factory=dict)

    def symbol_for(self, smiles: str) -> str:
        """Id of the symbol that draws `smiles`; empty when there is nothing to draw.

        Parameters
        ----------
        smiles : str

        Returns
        -------
        str
            Empty for no SMILES, one that cannot be drawn, or one longer than `MAX_SMILES`.
        """
        if smiles not in self._ids:
            markup = _draw(smiles)
            name = f"structure-{len(self.symbols) + 1}" if markup else ""
            self._ids[smiles] = name
            if markup:
                self.symbols[name] = markup
        return self._ids[smiles]

    def symbols_svg(self) -> str:
        """All symbols as markup, for one hidden drawing at the top of the page."""
        return "".join(
            f'<symbol id="{name}" viewBox="0 0 {WIDTH} {HEIGHT}">{markup}</symbol>'
            for name, markup in self.symbols.items()
        )


def _draw(smiles: str) -> str:
    from identify.chem.structures import draw_svg

    if not smiles or len(smiles) > MAX_SMILES or not smiles.isascii():
        return ""
    try:
        drawing = draw_svg(smiles, WIDTH, HEIGHT)
    except StructureError:
        # A structure that cannot be drawn is shown as its SMILES; the report must not fail for it.
        return ""
    return _join_paths(drawing)


def _join_paths(drawing: str) -> str:
    """Content of a drawing with paths of one style joined: the same picture in a third of the bytes."""
    content = drawing[drawing.index(">") + 1 : drawing.rindex("</svg>")]
    paths = _PATH.findall(content)
    if len(paths) != content.count("<"):
        return content
    styles: dict[str, list[str]] = {}
    for outline, style in paths:
        styles.setdefault(style, []).append(re.sub(r"\s*([MLQCZ])\s*", r"\1", outline.replace(",", " ")))
    return "".join(f'<path d="{"".join(outlines)}" {style}/>' for style, outlines in styles.items())
