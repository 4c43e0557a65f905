"""What both commands for archives can be told about the work, as arguments of the command line."""

import os
from typing import Annotated

import typer

ONE_PER_CORE = os.cpu_count() or 1

Processes = Annotated[
    int, typer.Option(min=1, help="Pages at work at the same time; else one per core.")
]
Cluster = Annotated[
    str | None,
    typer.Option(help="Address of a dask scheduler whose workers do the work, tcp://HOST:PORT."),
]
PageSeconds = Annotated[float, typer.Option(min=1, help="Give a page up after so long.")]
PageMemory = Annotated[int, typer.Option(min=1024, help="Address space for one process.")]
