"""The command ``densityloom``."""

from __future__ import annotations

import argparse
import os
import signal
import sys
from collections.abc import Sequence
from contextlib import closing
from importlib.metadata import version
from pathlib import Path
from typing import Any

import orjson
from tqdm import tqdm

from engine.errors import EngineError
from engine.evaluate import Work
from engine.synthesis import Progress
from service import cli_keys, cli_serve, intake, pipeline
from service.encoders.negotiation import MEDIA_TYPES, formats_of
from service.encoders.report import report_csv, report_json
from service.encoders.stack import write_stack
from service.parts import Part
from service.problems import Problem, at
from service.schemas.coefficient_set import CoefficientSetIn, ReflectionSetIn
from service.schemas.films import FilmRequestIn
from service.schemas.products import ProductIn
from service.schemas.requests import INSPECT, InspectIn
from service.schemas.series import SeriesIn
from service.schemas.store import KeepIn
from service.schemas.treatment import SetRequestIn
from service.settings import Settings, load_settings
from service.spool import Spool
from service.stacks import stack
from service.store.shelf import Shelf
from service.terminal import render
from service.terminal_report import render_report
from service.terminal_stack import render_stack
from service.terminal_summary import render_summary

SILENT_SECONDS = 1.5
"""Work that is over by then shows no progress."""
TABLE_TYPES = {".csv": intake.CSV, ".npz": intake.NPZ}


def main(arguments: Sequence[str] | None = None) -> int:
    """Run the command; returns its exit code."""
    parser = _parser()
    options = parser.parse_args(arguments)
    try:
        return int(options.action(options))
    except Problem as problem:
        print(f"densityloom: {problem.detail}", file=sys.stderr)
        for place in problem.places[1:]:
            print(f"  {place.pointer}: {place.reason}. {place.cure[:1].upper()}{place.cure[1:]}.", file=sys.stderr)
    except BrokenPipeError:
        # Whoever read our output has seen enough; nothing more may be written, not even at exit.
        os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())
        return 0
    except FileNotFoundError as fault:
        print(f"densityloom: cannot open {fault.filename}: there is no such file or folder", file=sys.stderr)
    except (ValueError, OSError, EngineError) as fault:
        print(f"densityloom: {fault}", file=sys.stderr)
    except KeyboardInterrupt:
        print("densityloom: interrupted, nothing was written", file=sys.stderr)
        return 130
    return 2


def _parser() -> argparse.ArgumentParser:
    parser = argparse.ArgumentParser(prog="densityloom", description="Real-space densities from Fourier coefficients.")
    parser.add_argument("--version", action="version", version=f"densityloom {version('densityloom')}")
    actions = parser.add_subparsers(required=True, metavar="ACTION")

    cli_serve.add(actions)
    cli_keys.add(actions)

    run = actions.add_parser("run", help="compute one request without a server")
    run.add_argument("request", type=Path, help="JSON file; its member product names what is wanted")
    run.add_argument("--columns", type=Path, help="CSV or .npz file with the columns of the set")
    run.add_argument("--reflections", type=Path, help="CIF, delimited text or .npz with reflections to prepare")
    run.add_argument("--reference", type=Path, help="a second such file, whose scale the first is brought to")
    run.add_argument("--with-columns", type=Path, help="the same of the second set of a combination or comparison")
    run.add_argument("--with-reflections", type=Path, help="a file of reflections for the second set")
    run.add_argument(
        "--out",
        type=Path,
        help=f"file to write, by its ending ({', '.join(MEDIA_TYPES)}); else show the result",
    )
    run.add_argument("--threads", type=int, default=_cores(), help="default: all cores")
    run.set_defaults(action=_run)

    inspect = actions.add_parser("inspect", help="summarise a file of reflections")
    inspect.add_argument("reflections", type=Path, help="CIF, delimited text or .npz")
    inspect.add_argument("--reference", type=Path, help="a second such file, whose scale the first is brought to")
    inspect.add_argument("--request", type=Path, help="JSON file whose set says how to prepare the reflections")
    inspect.add_argument("--json", action="store_true", help="print the summary as JSON")
    inspect.set_defaults(action=_inspect)
    return parser


def _cores() -> int:
    return len(os.sched_getaffinity(0)) if hasattr(os, "sched_getaffinity") else os.cpu_count() or 1


def _run(options: argparse.Namespace) -> int:
    # A batch system ends its jobs so; our unfinished file must not outlive it either.
    signal.signal(signal.SIGTERM, signal.default_int_handler)
    settings = load_settings()
    if options.threads < 1:
        raise ValueError("--threads: give at least 1")
    document = intake.decode(options.request.read_bytes())
    files = {name: part for name in intake.FILES if (part := _file(options, name)) is not None}
    with closing(Shelf(settings)) as shelf:
        product, request = intake.check(None, document, files, max_body_bytes=settings.max_body_bytes, shelf=shelf)
    if isinstance(request, InspectIn):
        raise ValueError(f"{options.request.name} asks for an inspection: use densityloom inspect")
    if isinstance(request, KeepIn):
        raise ValueError(f"{options.request.name} is for the store of a service: POST it to /v1/sets")
    form = _form(product, options.out)
    if isinstance(request, FilmRequestIn):
        return _film(request, form, options, settings)
    if isinstance(request, SeriesIn):
        return _series(request, form, options, settings)
    if not isinstance(request, ProductIn):
        return _analyse(product, request, form, options, settings)
    partial = options.out and options.out.with_name(f".{options.out.name}.partial")
    with Spool.at(partial) if partial else Spool.unnamed() as spool:
        try:
            done = pipeline.run(product, request, form, spool, settings, threads=options.threads, watch=_watch)
        except BaseException:
            if partial:
                partial.unlink(missing_ok=True)
            raise
    if partial:
        partial.replace(options.out)
    print(render(done.shown))
    print(f"  {done.seconds:.3g} s" + (f", written to {options.out}" if options.out else ""))
    return 0


def _analyse(
    product: str, request: SetRequestIn, form: str | None, options: argparse.Namespace, settings: Settings
) -> int:
    with tqdm(
        total=1.0, desc=product, delay=SILENT_SECONDS, leave=False, bar_format="{desc} {percentage:3.0f}%"
    ) as bar:

        def progress(done: int, total: int) -> None:
            bar.update(done / total - bar.n)

        report = pipeline.analyse(product, request, settings, threads=options.threads, progress=progress)
    print(render_report(report))
    if options.out is not None:
        _written(options.out, report_json(report) if form == "json" else report_csv(report))
    return 0


def _film(request: FilmRequestIn, form: str | None, options: argparse.Namespace, settings: Settings) -> int:
    with tqdm(desc="films", delay=SILENT_SECONDS, leave=False) as bar:

        def progress(done: int, total: int) -> None:
            bar.total = total
            bar.update(done - bar.n)

        report = pipeline.film_report(request, settings, threads=options.threads, progress=progress)
    print(render_report(report))
    if options.out is not None and form is not None:
        _written(options.out, pipeline.film_answer(request, form, settings, threads=options.threads))
    return 0


def _series(request: SeriesIn, form: str | None, options: argparse.Namespace, settings: Settings) -> int:
    with tqdm(total=len(request.members), desc="series", delay=SILENT_SECONDS, leave=False) as bar:

        def progress(done: int, total: int) -> None:
            bar.total = total
            bar.update(done - bar.n)

        made = stack(request, settings, form, threads=options.threads, progress=progress)
    print(render_stack(made))
    if options.out is not None and form is not None:
        _written(options.out, write_stack(made, form, request, settings))
    return 0


def _written(out: Path, content: bytes) -> None:
    """Write a file whole or not at all."""
    partial = out.with_name(f".{out.name}.partial")
    partial.write_bytes(content)
    partial.replace(out)
    print(f"  written to {out}")


def _file(options: argparse.Namespace, name: str) -> Part | None:
    """The file of an option; that of a table is told apart by its ending."""
    path: Path | None = getattr(options, name, None)
    if path is None:
        return None
    media_type = ""
    if name.endswith("columns"):
        media_type = TABLE_TYPES.get(path.suffix, "")
        if not media_type:
            option = name.replace("_", "-")
            raise ValueError(f"--{option}: {path.name} does not end in {' or '.join(TABLE_TYPES)}")
    return Part(media_type, path.read_bytes(), path.name)


def _inspect(options: argparse.Namespace) -> int:
    settings = load_settings()
    document: dict[str, Any] = {} if options.request is None else intake.decode(options.request.read_bytes())
    given = document.get("set", {})
    if not isinstance(given, dict):
        raise at(("set",), "is not an object", "give a JSON object")
    # A request for a density says how its file is prepared; what else it says of its set, an inspection does not ask.
    others = set(CoefficientSetIn.model_fields) - set(ReflectionSetIn.model_fields)
    taken = {name: value for name, value in given.items() if name not in others}
    _, request = intake.check(
        INSPECT,
        {"set": taken},
        {name: part for name in ("reflections", "reference") if (part := _file(options, name)) is not None},
        max_body_bytes=settings.max_body_bytes,
    )
    if not isinstance(request, InspectIn):
        raise TypeError("an inspection was checked as something else")
    with tqdm(unit="B", unit_scale=True, desc="reading", delay=SILENT_SECONDS, leave=False) as bar:

        def report(done: int, total: int) -> None:
            bar.total = total
            bar.update(done - bar.n)

        made = pipeline.inspect(request, settings, progress=report)
    print(orjson.dumps(made, option=orjson.OPT_INDENT_2).decode() if options.json else render_summary(made))
    return 0


def _form(product: str, out: Path | None) -> str | None:
    if out is None:
        return None
    form = out.suffix.removeprefix(".")
    if form not in formats_of(product):
        raise ValueError(f"--out: a {product} is written as {', '.join(formats_of(product))}, not {out.suffix or out}")
    return form


def _watch(work: Work) -> Progress:
    bar = tqdm(
        total=1.0,
        desc=f"{work.plans[0].method}, about {work.seconds:.0f} s",
        delay=SILENT_SECONDS,
        leave=False,
        bar_format="{desc} {percentage:3.0f}% |{bar}| {remaining} left",
    )

    def report(done: int, total: int) -> None:
        bar.update(done / total - bar.n)
        if done == total:
            bar.close()

    return report


if __name__ == "__main__":
    sys.exit(main())
