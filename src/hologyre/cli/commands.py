"""What each command takes and does."""

from __future__ import annotations

import json
import os
from importlib import import_module, metadata
from pathlib import Path
from typing import TYPE_CHECKING, Annotated

import typer

from hologyre.cli.faults import UsageFault
from hologyre.cli.progress import Progress

if TYPE_CHECKING:
    from hologyre.recipe import Recipe

app = typer.Typer(
    name="hologyre",
    help="From off-axis hologram time-lapses to trajectories of phase singularities.",
    no_args_is_help=True,
    pretty_exceptions_enable=False,
    add_completion=False,
    rich_markup_mode=None,
    context_settings={"help_option_names": ["-h", "--help"]},
)

StackArgument = Annotated[
    str,
    typer.Argument(
        metavar="STACK",
        help="Image file, folder of images, or a quoted pattern such as 'run1/*.tif'.",
        show_default=False,
    ),
]
RecipeOption = Annotated[
    Path | None,
    typer.Option("--recipe", metavar="FILE", help="Recipe; what it leaves auto is surveyed."),
]


def _version(wanted: bool) -> None:
    if wanted:
        typer.echo(f"hologyre {metadata.version('hologyre')}")
        raise typer.Exit


@app.callback()
def _hologyre(
    version: Annotated[
        bool,
        typer.Option("--version", callback=_version, is_eager=True, help="Show the version."),
    ] = False,
) -> None:
    pass


@app.command()
def inspect(
    stack: StackArgument,
    recipe: RecipeOption = None,
    as_json: Annotated[bool, typer.Option("--json", help="Print the findings as JSON.")] = False,
    follow: Annotated[
        bool,
        typer.Option("--follow", help="Watch a folder and report on its newest frame, to align."),
    ] = False,
) -> None:
    """Say how well a stack can be measured: carrier, band, visibility, noise, warnings."""
    from hologyre.analyse import inspect as look
    from hologyre.stacks import open_stack

    settings = _load(recipe)
    if follow:
        from hologyre.cli.follow import follow as watch

        watch(stack, settings, as_json)
    findings = look(open_stack(stack), settings)
    if as_json:
        typer.echo(json.dumps(findings.as_dict(), indent=2))
    else:
        typer.echo("\n".join(findings.sentences()))


@app.command("recipe")
def write_recipe(
    stack: StackArgument,
    out: Annotated[
        Path | None, typer.Option(metavar="FILE", help="TOML file; without it: standard output.")
    ] = None,
    recipe: RecipeOption = None,
) -> None:
    """Survey a stack and write the recipe, every setting decided and explained."""
    from hologyre.recipe import recipe_text, save_recipe
    from hologyre.results import OutputError
    from hologyre.stacks import open_stack
    from hologyre.survey import survey

    if out is not None and out.exists():
        raise OutputError(f"{out}: there is such a file already; choose another name.")
    surveyed = survey(open_stack(stack), _load(recipe))
    if out is None:
        typer.echo(recipe_text(surveyed), nl=False)
        return
    try:
        save_recipe(surveyed, out)
    except OSError as error:
        raise OutputError(f"{out}: the recipe cannot be written ({error.strerror}).") from error
    typer.echo(f"recipe: {out}")


@app.command("run")
def run_stacks(
    stacks: Annotated[
        list[str],
        typer.Argument(
            metavar="STACK",
            help="Stacks; several image files are several stacks, a quoted pattern is one.",
            show_default=False,
        ),
    ],
    recipe: RecipeOption = None,
    out: Annotated[
        Path | None,
        typer.Option(
            metavar="DIR",
            help="Result folder; for several stacks the folder that gets theirs and summary.csv. "
            "Without it: beside the stack, with its name and .hologyre.",
        ),
    ] = None,
    replace: Annotated[
        bool, typer.Option("--replace", help="Write over another run's results.")
    ] = False,
    resume: Annotated[
        bool, typer.Option("--resume", help="Go on with a run that was interrupted.")
    ] = False,
    frames: Annotated[
        str | None,
        typer.Option(metavar="A:B", help="Only these frames, from A to before B; counted from 0."),
    ] = None,
    workers: Annotated[
        int | None,
        typer.Option(
            min=1, metavar="N", help="Frames worked on side by side.", show_default="all cores"
        ),
    ] = None,
    scheduler: Annotated[
        str | None, typer.Option(metavar="ADDRESS", help="Compute on this dask scheduler instead.")
    ] = None,
    annotations: Annotated[
        Path | None,
        typer.Option(
            metavar="FILE",
            help="Log of edits by hand (edits.jsonl) to replay on what is found; for one stack.",
        ),
    ] = None,
    keep_fields: Annotated[
        bool, typer.Option("--keep-fields", help="Write the complex fields as fields.zarr.")
    ] = False,
) -> None:
    """Analyse stacks: singularities, trajectories, events and an overview figure."""
    from hologyre.cli.batch import Options, run_all
    from hologyre.recipe import Recipe

    if replace and resume:
        raise UsageFault("--replace and --resume exclude each other; give one of them.")
    if scheduler is not None and workers is not None:
        raise UsageFault("--workers and --scheduler exclude each other; give one of them.")
    if annotations is not None and len(stacks) > 1:
        raise UsageFault(
            f"--annotations: a log of edits is of one stack, and {len(stacks)} are given; run each "
            "with its own."
        )
    settings = _load(recipe)
    if frames is not None:
        settings = (settings or Recipe()).with_settings({"stack.frames": frames})
    options = Options(
        existing="replace" if replace else "resume" if resume else "refuse",
        workers=workers or _cores(),
        scheduler=scheduler,
        keep_fields=keep_fields,
        annotations=annotations,
    )
    raise typer.Exit(run_all(stacks, out, settings, options))


@app.command()
def simulate(
    scene: Annotated[str, typer.Argument(metavar="SCENE", show_default=False)],
    out: Annotated[Path, typer.Option(metavar="DIR", help="Folder to write into.")],
    seed: Annotated[int, typer.Option(min=0, help="Seed of all that is random.")] = 0,
) -> None:
    """Write a simulated stack and its truth."""
    from hologyre.results import OutputError
    from hologyre.simulate.scenes import SCENES, write_scene

    if scene not in SCENES:
        raise UsageFault(f"{scene}: there is no such scene; choose among {', '.join(SCENES)}.")
    try:
        with Progress(scene, "percent") as progress:
            files = write_scene(
                scene, out, seed=seed, progress=lambda part: progress(round(100 * part), 100)
            )
    except FileExistsError as error:
        raise OutputError(f"{error}; choose another folder by --out.") from error
    for name, path in files._asdict().items():
        typer.echo(f"{name}: {path}")


@app.command()
def view(
    stack: StackArgument,
    result: Annotated[
        Path | None, typer.Option(metavar="DIR", help="Result folder to load with it.")
    ] = None,
) -> None:
    """Open a stack in napari, everything loaded."""
    from hologyre.results import default_folder, read_run
    from hologyre.stacks import open_stack

    opened = open_stack(stack)
    try:
        napari, launch = import_module("napari"), import_module("hologyre.viewer.launch")
    except ModuleNotFoundError as error:
        if (error.name or "").startswith("hologyre"):
            raise
        raise UsageFault(
            f"the viewer needs {error.name}, which is not installed; run: pip install "
            "'hologyre[viewer]'."
        ) from error
    if result is None and read_run(default_folder(opened)) is not None:
        result = default_folder(opened)
    launch.view(stack, result=result)
    napari.run()


def _load(recipe: Path | None) -> Recipe | None:
    from hologyre.recipe import load_recipe

    return None if recipe is None else load_recipe(recipe)


def _cores() -> int:
    return len(os.sched_getaffinity(0)) if hasattr(os, "sched_getaffinity") else os.cpu_count() or 1
