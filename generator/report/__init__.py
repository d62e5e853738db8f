"""Revisions become files: words, figures, pages, and their publishing.

In: Campaign, Findings and Revisions.  Out: files by address, and an output folder that is never
half-published.  Used by ``book``.
"""
