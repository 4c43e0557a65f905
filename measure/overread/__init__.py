"""The over-read page: a person checks, corrects, measures and signs one ECG in the browser.

The state of a session is the list of corrections and nothing else: every number that the page
shows comes from the same stages as on the command line, computed again from the first stage that
a correction reaches.
"""
