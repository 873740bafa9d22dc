"""How like the query is every entry of the library, and which entries come closest?

Exact: the scores are those of `identify.similarity.scores` on `identify.spectra.align.align`, for every entry, over the m/z
range both spectra cover.

    build_index(rows, weighting) → SearchIndex → search_index(index, spectrum, k)  → hits
                                               → search_many(index, spectra, k)    → hits of each, on all cores
                                               → score_all(index, spectrum)        → ids, cosine, reverse

Read `segment` for the layout, `scan` for the pass over it and why no entry is lost, `search` for growth.

Not for: files (`identify.library.cache` stores the arrays), what a hit means (`identify.evidence`, `identify.ranking`).
"""

from identify.index.batch import search_many
from identify.index.search import SearchIndex, build_index, score_all, search_index

__all__ = ["SearchIndex", "build_index", "score_all", "search_index", "search_many"]
