"""Thousands of pages, unattended: a store of results and its catalogue.

A store is a folder: `catalogue.sqlite` beside `pages/`, where results are named by the content of
their source. Sources are only read. Workers return records; the parent alone writes.
"""
