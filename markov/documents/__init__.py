"""Documents for a safety case: one neutral tree, a writer for each format.

A document is a tree of plain values (`tree`); `report` builds it from a solved model; each writer turns the same tree
into one format and knows nothing of plants or chains.
"""
