"""Commands: read arguments, call, print. No physics, no file formats.

The result goes to stdout, everything else to stderr. Exit status: 0 done; 1 the computation failed; 2 bad
input; 3, only with --strict, when in some step no choice keeps its chance over within the accepted risk.
"""

from __future__ import annotations

import os
import sys
from collections.abc import Iterable
from pathlib import Path
from typing import TYPE_CHECKING, Annotated, Any, NoReturn, TextIO

import typer

if TYPE_CHECKING:
    from purity.catalogue import Cover, Shown
    from purity.database import Library
    from purity.draws import Draws
    from purity.errors import Fault, PurityError
    from purity.result import Result
    from purity.scenario import Scenario

FAILED, BAD_INPUT, RISK_PASSED = 1, 2, 3
#: Draws from which it pays to run the choices of a step in several processes.
PARALLEL = 1024
#: Draws in a block, the unit in which --draws counts.
BLOCK = 256

HELP = {"help_option_names": ["-h", "--help"]}
app = typer.Typer(
    add_completion=False,
    no_args_is_help=True,
    pretty_exceptions_enable=False,
    rich_markup_mode=None,
    context_settings=HELP,
    help="How much impurity each choice of a process step adds to 4N to 7N metal, and how sure that is.",
    epilog="Example: purity rank scenarios/copper-remelt.toml",
)
data_app = typer.Typer(
    no_args_is_help=True,
    rich_markup_mode=None,
    context_settings=HELP,
    help="List, show and check the records behind every number, with their sources.",
)
app.add_typer(data_app, name="data")

Folder = Annotated[
    Path | None,
    typer.Option("--data", metavar="FOLDER", help="Your own tables, laid over those of the package."),
]
AsJson = Annotated[bool, typer.Option("--json", help="Print JSON instead of the table.")]
Temperature = Annotated[
    str | None, typer.Option("--temperature", "-T", metavar="T", help='With its unit: "1180 degC".')
]
Force = Annotated[bool, typer.Option("--force", help="Replace a file that exists.")]


def main() -> None:
    """Run the command line; no traceback reaches the user unless PURITY_DEBUG is set."""
    from purity.errors import PurityError

    try:
        app()
    except PurityError as error:
        _end(_status(error), str(error))
    except BrokenPipeError:
        # The reader has gone: what is left in the buffer goes nowhere.
        os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())
        sys.exit(FAILED)
    except OSError as error:
        _end(BAD_INPUT, f"{error.filename or 'file'}: {error.strerror or error}")
    except Exception as error:
        if os.environ.get("PURITY_DEBUG"):
            raise
        text = " ".join(str(error).split())
        _end(FAILED, f"the computation failed: {type(error).__name__}: {text} (PURITY_DEBUG=1 shows where)")


def _status(error: PurityError) -> int:
    from purity.errors import IllPosedError

    return FAILED if isinstance(error, IllPosedError) else BAD_INPUT


def _end(status: int, text: str) -> NoReturn:
    _note(text)
    sys.exit(status)


def _note(text: str) -> None:
    _write(sys.stderr, f"{text}\n")


def _say(text: str) -> None:
    _write(sys.stdout, text)


def _write(stream: TextIO, text: str) -> None:
    """Write a text whatever the encoding of the stream can hold."""
    encoding = stream.encoding or "utf-8"
    try:
        text.encode(encoding)
    except UnicodeEncodeError:
        plain = text.translate({ord("†"): "+", ord("µ"): "u", ord("–"): "-", ord("·"): "."})
        text = plain.encode(encoding, "replace").decode(encoding)
    stream.write(text)
    stream.flush()


def _save(path: Path, made: str | bytes) -> None:
    """Write a file whole or not at all."""
    from tempfile import NamedTemporaryFile

    content = made.encode("utf-8") if isinstance(made, str) else made
    with NamedTemporaryFile("wb", dir=path.parent, prefix=f".{path.name}.", delete=False) as part:
        try:
            part.write(content)
            part.close()
            Path(part.name).chmod(0o666 & ~_umask())
            Path(part.name).replace(path)
        except BaseException:
            Path(part.name).unlink(missing_ok=True)
            raise


def _umask() -> int:
    mask = os.umask(0)
    os.umask(mask)
    return mask


def _free(path: Path | None, force: bool) -> None:
    """Refuse a file that exists before anything is computed."""
    if path is not None and path.exists() and not force:
        _end(BAD_INPUT, f"{path} exists: give another name, or --force to replace it")


def _version(wanted: bool) -> None:
    if wanted:
        from purity import __version__

        _say(f"purity {__version__}\n")
        raise typer.Exit


@app.callback()
def _purity(
    version: Annotated[
        bool, typer.Option("--version", callback=_version, is_eager=True, help="Print the version.")
    ] = False,
) -> None:
    pass


@app.command(
    epilog="Examples: purity rank lot.toml;  purity rank lot.toml --json > lot.json;  "
    'purity rank lot.toml --detail --route "graphite under argon, cold mould"'
)
def rank(
    file: Annotated[Path, typer.Argument(metavar="FILE", help="Scenario file.")],
    as_json: AsJson = False,
    csv: Annotated[
        Path | None, typer.Option(metavar="PATH", help="Also write one row per choice and element.")
    ] = None,
    detail: Annotated[
        bool, typer.Option("--detail", help="Every choice, with driving force, ceilings and records.")
    ] = False,
    draws: Annotated[int, typer.Option(min=1, help="Draws, rounded up to a multiple of 256.")] = 2048,
    seed: Annotated[int, typer.Option(help="Seed of the draws.")] = 1,
    strict: Annotated[
        bool, typer.Option("--strict", help="Exit 3 if some step has no choice within the accepted risk.")
    ] = False,
    route: Annotated[
        str | None, typer.Option(metavar='"A,B"', help="Enter later steps after these choices.")
    ] = None,
    data: Folder = None,
    force: Force = False,
) -> None:
    """Rank the choices of every step of FILE and print the risk table."""
    _free(csv, force)
    library, scenario = _scenario(file, data)
    steps = None if route is None else _route(route, scenario)
    result = _assess(scenario, library, _draws(draws, seed), steps)
    if csv is not None:
        from purity.report.export import as_csv

        _save(csv, as_csv(result))
        _note(f"wrote {csv}")
    _say(_shown(result, as_json=as_json, detail=detail))
    if strict:
        from purity.risk import beyond

        if names := beyond(result):
            _end(RISK_PASSED, f"no choice within the accepted risk in: {', '.join(names)}")


def _scenario(file: Path, data: Path | None) -> tuple[Library, Scenario]:
    from purity.database import load
    from purity.scenario_file import read

    library = load(data)
    scenario = read(file, library)
    return (load(data, scenario.prefer) if scenario.prefer else library), scenario


def _draws(wanted: int, seed: int) -> Draws:
    from purity.draws import Draws

    blocks = -(-wanted // BLOCK)
    if blocks * BLOCK != wanted:
        _note(f"draws: {wanted} rounded up to {blocks * BLOCK}, a multiple of {BLOCK}")
    return Draws(seed=seed, blocks=blocks, block=BLOCK)


def _assess(scenario: Scenario, library: Library, draws: Draws, route: tuple[str, ...] | None) -> Result:
    from purity.assess import assess

    if sys.stderr.isatty():
        count = sum(len(step.choices) for step in scenario.steps)
        _note(f"{len(scenario.steps)} steps, {count} choices, {draws.n} draws ...")
    workers = min(os.cpu_count() or 1, max(len(step.choices) for step in scenario.steps))
    if workers < 2 or draws.n < PARALLEL:
        return assess(scenario, library, draws, route=route)
    from concurrent.futures import ProcessPoolExecutor

    with ProcessPoolExecutor(workers) as executor:
        return assess(scenario, library, draws, executor=executor, route=route)


def _shown(result: Result, *, as_json: bool, detail: bool) -> str:
    if as_json:
        from purity.report.export import as_json as text

        return text(result)
    from purity.report.terminal import render

    return render(result, width=_width(), detail=detail, color=_color())


def _width() -> int:
    """Columns of the terminal; 80, or what COLUMNS says, where the output is piped."""
    from shutil import get_terminal_size

    if sys.stdout.isatty() or os.environ.get("COLUMNS"):
        return max(80, min(get_terminal_size().columns, 200))
    return 80


def _color() -> bool:
    return sys.stdout.isatty() and not os.environ.get("NO_COLOR") and os.environ.get("TERM") != "dumb"


def _route(text: str, scenario: Scenario) -> tuple[str, ...]:
    """Read one choice for every step; a name may itself hold commas."""
    rest, found = text.strip(), []
    for step in scenario.steps:
        names = sorted((choice.name for choice in step.choices), key=len, reverse=True)
        name = next((n for n in names if f"{rest},".replace(" ,", ",").startswith(f"{n},")), None)
        if name is None:
            said = rest.split(",")[0].strip()
            _end(BAD_INPUT, f"--route: step {step.name!r} has no choice {said!r}; {_near(said, names)}")
        found.append(name)
        rest = rest.removeprefix(name).strip().removeprefix(",").strip()
    if rest:
        _end(BAD_INPUT, f"--route: {rest!r} is left over after {len(found)} steps")
    return tuple(found)


def _near(said: str, names: Iterable[str]) -> str:
    from difflib import get_close_matches

    known = list(names)
    return f"nearest: {', '.join(get_close_matches(said, known, 3, 0.4) or sorted(known))}"


@app.command(
    epilog='Examples: purity affinity Cu Fe -T "1180 degC";  '
    'purity affinity Cu O -T "1180 degC" --against magnesia --atmosphere "argon N5.0"'
)
def affinity(
    host: Annotated[str, typer.Argument(metavar="HOST")],
    impurity: Annotated[str, typer.Argument(metavar="IMPURITY")],
    temperature: Annotated[str, typer.Option("--temperature", "-T", help='With its unit: "1180 degC".')],
    phase: Annotated[str | None, typer.Option(help="Phase of the host; the stable one if not given.")] = None,
    against: Annotated[
        list[str] | None, typer.Option(help="A wall; may be repeated. All that hold IMPURITY if not given.")
    ] = None,
    atmosphere: Annotated[str | None, typer.Option(help="Gas that sets oxygen, nitrogen, hydrogen.")] = None,
    figure: Annotated[
        Path | None, typer.Option(help="Draw energy against content: a .svg or .png file.")
    ] = None,
    as_json: AsJson = False,
    data: Folder = None,
    force: Force = False,
) -> None:
    """Say how far IMPURITY would go into HOST: activity, driving force, ceilings; no rates."""
    from dataclasses import asdict

    from purity.affinity import affinity as answer
    from purity.database import load
    from purity.quantities import number
    from purity.report.affinity import render
    from purity.report.export import plain_json

    library = load(data)
    _known(library, host)
    found = answer(library, host, impurity, number(temperature, "temperature"), phase, against, atmosphere)
    facts = asdict(found)
    if figure:
        _draw(facts, figure, force)
    _say(plain_json(facts) if as_json else render(facts, width=_width()))


def _draw(facts: dict[str, Any], figure: Path, force: bool) -> None:
    """Write the figure of an affinity, whole or not at all."""
    from purity.report.figures import FORMATS, affinity

    kind = figure.suffix.lstrip(".").lower()
    if kind not in FORMATS:
        _end(BAD_INPUT, f"{figure}: a figure ends in .{' or .'.join(FORMATS)}")
    _free(figure, force)
    try:
        drawn = affinity(facts, kind)
    except ModuleNotFoundError:
        _end(BAD_INPUT, 'figures need matplotlib: pip install "purity[figures]"')
    _save(figure, drawn)
    _note(f"wrote {figure}")


@app.command(epilog="Example: purity new lot.toml, then edit it, then purity rank lot.toml")
def new(
    file: Annotated[Path, typer.Argument(metavar="FILE", help="Scenario file to write.")],
    force: Force = False,
) -> None:
    """Write a commented scenario to start from."""
    from purity.new import text

    _free(file, force)
    _save(file, text())
    _note(f"wrote {file}: edit it, then run purity rank {file}")


@data_app.command()
def verify() -> None:
    """Check the tables of the package.

    Rules, bounds, sources, sums of compositions, and files unchanged since their release.
    """
    from purity.database import load
    from purity.table_files import verify as faults_in

    if faults := faults_in():
        _faults(faults, FAILED)
    library = load()
    records = sum(len(rows) for rows in library.tables.values())
    tables = sum(1 for rows in library.tables.values() if rows)
    _say(f"{tables} tables, {records} records, {len(library.sources)} sources: no fault\n")
    _say(f"data {library.data_hash}\n")


@data_app.command()
def check(
    folder: Annotated[Path, typer.Argument(metavar="FOLDER", help="Folder with your own tables.")],
) -> None:
    """Check your own tables before --data uses them."""
    from purity.table_files import check as faults_in

    if faults := faults_in(folder):
        _faults(faults, BAD_INPUT)
    _say(f"{folder}: no fault\n")


def _faults(faults: Iterable[Fault], status: int) -> NoReturn:
    _end(status, "\n".join(f"{fault.key}:{fault.line}: {fault.text}" for fault in faults))


@data_app.command(epilog='Example: purity data show Cu O -T "1180 degC"')
def show(
    host: Annotated[str, typer.Argument(metavar="HOST")],
    element: Annotated[str, typer.Argument(metavar="ELEMENT")],
    temperature: Temperature = None,
    data: Folder = None,
) -> None:
    """Show the records on ELEMENT in HOST.

    Each with its source, range and class, and with -T its value and spread at that temperature.
    """
    from purity.catalogue import show as records_on
    from purity.database import load
    from purity.quantities import number

    library = load(data)
    _known(library, host)
    at = None if temperature is None else number(temperature, "temperature")
    found = records_on(library, host, element, 1000.0 if at is None else at)
    if not found:
        _end(
            BAD_INPUT, f"no record on {element!r} in {host}: purity data coverage {host} lists what there is"
        )
    _say("\n".join(_record(record, with_value=at is not None) for record in found))


def _record(record: Shown, *, with_value: bool) -> str:
    lines = [record.quantity]
    if with_value and record.value is not None:
        spread = "" if record.low is None else f" (one sigma: {record.low:.3g} to {record.high:.3g})"
        far = ", outside its range" if record.outside else ""
        lines.append(f"  {record.value:.4g} {record.unit}{spread}{far}")
    if record.T_min is not None:
        lines.append(f"  valid {record.T_min:g} to {record.T_max:g} K")
    lines.append(f"  class {record.quality}, {record.origin}: {record.citation}, {record.where}")
    lines += [f"  {text}" for text in (record.address, record.note) if text]
    for source, value in record.rivals:
        told = f": {value:.4g}" if with_value and value is not None else ""
        lines.append(f"  rival {source}{told}")
    return "\n".join(lines) + "\n"


def _known(library: Library, host: str) -> None:
    hosts = library.names("hosts", "host")
    if host not in hosts:
        _end(BAD_INPUT, f"no host {host!r} in the tables; {_near(host, hosts)}")


@data_app.command()
def sources(data: Folder = None) -> None:
    """List every source: key, citation, address."""
    from purity.database import load
    from purity.report.plain import table

    rows = [
        (key, ", ".join(filter(None, (source.get("citation", ""), source.get("address", "")))))
        for key, source in sorted(load(data).sources.items())
    ]
    _say(table(("key", "source"), rows, width=_width()))


@data_app.command(epilog="Examples: purity data coverage;  purity data coverage Cu")
def coverage(
    host: Annotated[str | None, typer.Argument(metavar="[HOST]")] = None, data: Folder = None
) -> None:
    """Say how well hosts and elements are known.

    Without HOST every host with its count of records by class; with HOST every element in it: A measured
    and narrow, B measured, C from memory, D estimate, - nothing.
    """
    from purity.catalogue import coverage as covers
    from purity.database import load
    from purity.report.plain import table

    library = load(data)
    if host is not None:
        _known(library, host)
        _say(table(*_by_element(covers(library, host)), width=_width()))
        return
    rows = []
    for name in library.names("hosts", "host"):
        known = covers(library, name)
        classes = [sum(cover.quality == quality for cover in known) for quality in "ABCD"]
        rows.append((name, str(len({c.element for c in known if c.quality})), *map(str, classes), ""))
    _say(table(("host", "elements", "A", "B", "C", "D", ""), rows, width=_width()))


def _by_element(covers: Iterable[Cover]) -> tuple[list[str], list[list[str]]]:
    """Titles and rows: element and phase down, properties across; rows without any record are left out."""
    cells: dict[tuple[str, str], dict[str, str]] = {}
    for cover in covers:
        cells.setdefault((cover.element, cover.phase), {})[cover.table] = cover.quality or "-"
    titles = list(dict.fromkeys(title for row in cells.values() for title in row))
    rows = [
        [*place, *(row.get(title, "-") for title in titles), ""]
        for place, row in cells.items()
        if set(row.values()) != {"-"}
    ]
    return ["element", "phase", *titles, ""], rows
