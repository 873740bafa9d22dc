"""The browser: one local page for the whole job, from unknowns to a signed report.

Question answered: "what is on my bench, what do the data say, and what did we decide?" Pages call the pipeline and the
library and show the records the report shows.

Not for: any judgement of its own. A number on a page was computed in a lower room; only what people decide is kept here
(`case_file`).

How a query gets onto a page::

    upload → intake (a process with limits) → SpectrumRecord → pipeline.identify_query → result JSON → case file
    page   → case file → stored.rebuild → Identification → report.context → template
"""
