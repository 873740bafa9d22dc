"""Show it: a report on the terminal and as one HTML file.

Not for: deciding anything. What is shown was decided in `identify.ranking`; files for other programs are written by
`identify.writers`.
"""
