"""In which order, how sure, at what level, what next?

Entry points: `identify.ranking.shortlist.shortlist` (hits → ordered drafts, one per compound) and
`identify.ranking.rank.rank` (drafts + evidence → candidates, probability, claim, follow-up).

Not for: similarity scores themselves (`identify.similarity`), checks that do not come from the match
(`identify.evidence`), or anything that reads a file.
"""
