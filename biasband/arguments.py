"""What stands behind a command: its arguments and options, each with the help that it gets everywhere."""

from __future__ import annotations

from typing import Annotated, Literal

import typer

from biasband.constants import BOARDS, MOST_BOARDS

StageFile = Annotated[str, typer.Argument(metavar="STAGE", help="A stage file (TOML).")]
StageFiles = Annotated[
    list[str], typer.Argument(metavar="STAGE...", help="Stage files (TOML), or folders of them.")
]
AsJson = Annotated[bool, typer.Option("--json", help="Write the result as JSON.")]
BoardCount = Annotated[
    int, typer.Option("--boards", min=1, max=MOST_BOARDS, help="How many boards are sampled.")
]
ManyBoards = Annotated[
    str | None,
    typer.Option(
        "--boards",
        metavar="N",
        help=f"How many boards are sampled, as 1e6 or 2^20; else {BOARDS}, or up to 2^24 with --until.",
    ),
]
Sampling = Annotated[
    Literal["plain", "quasi-random"],
    typer.Option(
        "--sampling",
        help="plain: random boards, which yields are judged by. quasi-random: boards spread evenly, for "
        "means and quantiles with a smaller error.",
    ),
]
Until = Annotated[
    str | None,
    typer.Option(
        "--until",
        metavar="GOAL",
        help='Stop when so much is known: "yield ± 0.1 %", or "1 digit" or "2 digits" of every deviation.',
    ),
]
DrawsFile = Annotated[
    str | None,
    typer.Option(
        "--save",
        metavar="FILE",
        help="A new file (.csv or .npz), a row per board: draws, values and quantities.",
    ),
]
Cluster = Annotated[
    str | None,
    typer.Option("--cluster", metavar="ADDRESS", help='Work by a cluster, as "tcp://host:8786" (dask).'),
]
Seed = Annotated[int, typer.Option("--seed", min=0, help="Which random numbers are drawn.")]
NewFile = Annotated[
    str | None, typer.Option("--write", metavar="FILE", help="A new stage file with the values frozen.")
]
Resistances = Annotated[
    list[str], typer.Argument(metavar="VALUE...", help='Such as 4k7, "130 ohm", 4K7J, 01C or "red red gold".')
]
SeriesName = Annotated[
    str | None,
    typer.Option("--series", help="A preferred series, E3 to E192, or one of --tables; else E24."),
]
PartsFile = Annotated[
    str | None, typer.Option("--parts", metavar="FILE", help="A new CSV file: the parts list to order from.")
]
Tables = Annotated[
    str | None, typer.Option("--tables", metavar="DIR", help="A folder of series tables of your own.")
]
StockList = Annotated[
    str | None, typer.Option("--stock", metavar="FILE", help="A stock list (CSV) to choose from.")
]
Kept = Annotated[
    list[str] | None,
    typer.Option("--keep", metavar="NAME=VALUE", help="A value for this run, as in RC=3k3 (repeatable)."),
]
Coldest = Annotated[str | None, typer.Option("--from", metavar="T", help='The coldest, as "-40 degC".')]
Hottest = Annotated[str | None, typer.Option("--to", metavar="T", help='The hottest, as "85 degC".')]
Points = Annotated[int | None, typer.Option("--points", help="How many temperatures; else 11 or more.")]
