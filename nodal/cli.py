"""The command `nodal`: reads designs, prints sweeps and figures, checks requirements.

Exit status: 0 all well; 1 a requirement or a recorded figure failed; 2 the input or the call is wrong.
Heavy modules are imported inside the commands, so that `nodal --help` starts at once.
"""

from __future__ import annotations

import contextlib
import dataclasses
import itertools
import os
import sys
from collections.abc import Callable, Iterable, Iterator, Mapping, Sequence
from dataclasses import dataclass
from typing import IO, TYPE_CHECKING, Any, NoReturn, TypeVar

import click

from nodal import __version__
from nodal.files import replace_file
from nodal.language.diagnostics import DesignError

if TYPE_CHECKING:
    from nodal.design import Design, Model
    from nodal.figures.search import Floats, Span
    from nodal.language.diagnostics import Diagnostic
    from nodal.report.terminal import Page

FAILED = 1
WRONG = 2
INTERRUPTED = 130
BROKEN_PIPE = 141
"""128 + SIGPIPE, as shells report a program that its reader left."""


class Tool(click.Group):
    """The group of commands; whatever goes wrong ends here, as a diagnostic and an exit status."""

    def main(
        self,
        args: Sequence[str] | None = None,
        prog_name: str | None = None,
        complete_var: str | None = None,
        standalone_mode: bool = True,
        windows_expand_args: bool = True,
        **extra: Any,
    ) -> NoReturn:
        arguments = list(sys.argv[1:] if args is None else args)
        for stream in (sys.stdout, sys.stderr):
            reconfigure = getattr(stream, "reconfigure", None)
            if reconfigure is not None:
                reconfigure(errors="replace")  # a terminal without Ω shows ? rather than nothing
        prog_name = prog_name or "nodal"
        self._main_shell_completion(extra, prog_name, complete_var)
        sys.exit(self._run(arguments, prog_name, extra))

    def _run(self, arguments: list[str], prog_name: str, extra: dict[str, Any]) -> int:
        try:
            try:
                with self.make_context(prog_name, list(arguments), **extra) as context:
                    self.invoke(context)
                status = 0
            except click.exceptions.Exit as done:
                status = done.exit_code
            except click.UsageError as mistake:
                status = _report(_wrong_call(mistake), arguments)
            except DesignError as error:
                status = _report(error, arguments)
            sys.stdout.flush()
            return status
        except BrokenPipeError:
            _silence(sys.stdout)
            return BROKEN_PIPE
        except (KeyboardInterrupt, click.Abort):
            return INTERRUPTED


def _silence(stream: IO[str]) -> None:
    """Let what is still buffered go nowhere, so that closing the stream at exit does not complain."""
    with contextlib.suppress(OSError, ValueError):
        os.dup2(os.open(os.devnull, os.O_WRONLY), stream.fileno())


# Options, each declared once

_Command = TypeVar("_Command", bound=Callable[..., Any])


@dataclass(frozen=True, slots=True)
class Options:
    """The shared options of a call."""

    case: tuple[str, ...] = ()
    all_cases: bool = False
    let: tuple[str, ...] = ()
    drive: str | None = None
    format: str = "text"
    as_json: bool = False
    output: str | None = None
    quiet: bool = False
    color: str = "auto"

    @property
    def form(self) -> str:
        return "json" if self.as_json else self.format


_COLOR = click.option(
    "--color", type=click.Choice(["auto", "always", "never"]), default="auto", show_default=True,
    help="Color text; auto heeds NO_COLOR.",
)  # fmt: skip
_AS_JSON = click.option("--json", "as_json", is_flag=True, help="Short for --format json.")
_TO_FILE = click.option(
    "-o", "--output", metavar="FILE", help="Write the answer to FILE, whole or not at all."
)
_QUIET = click.option("-q", "--quiet", is_flag=True, help="Show no warnings and notes.")


def _output(*forms: str) -> list[Callable[[Any], Any]]:
    """How an answer is printed, in one of the forms that a command has."""
    return [
        click.option("--format", type=click.Choice(["text", *forms]), default="text", show_default=True,
                     help="How to print the answer."),
        _AS_JSON,
        _TO_FILE,
        _QUIET,
        _COLOR,
    ]  # fmt: skip


_OUTPUT = _output("json", "csv")
_TIDY = [
    click.option("--check", is_flag=True, help="Write nothing; name the files that are not tidy."),
    click.option("--diff", is_flag=True, help="Write nothing; show what would change."),
    click.option("-q", "--quiet", is_flag=True, help="Do not name files."),
    _COLOR,
]
_COMPARE = [
    click.option("--case", multiple=True, metavar="CASE", help="Compare this case alone; may be repeated."),
    click.option("--drive", metavar="DRIVE", help="Which sources move: a drive or a source of both files."),
]
_CASE = click.option("--case", multiple=True, metavar="CASE", help="A case of the file; may be repeated.")
_LET = click.option("--let", multiple=True, metavar="NAME=VALUE",
                    help="Give a `let` another value; may be repeated.")  # fmt: skip
_JOBS = click.option("-j", "--jobs", type=click.IntRange(min=1), metavar="N",
                     help="Files to work on at a time; one for each processor unless given.")  # fmt: skip
_CHECK = [
    _CASE,
    _LET,
    click.option("--dependents", is_flag=True, help="Check the designs that include a PATH, too."),
    click.option("--no-solve", is_flag=True, help="Only read the files and check their connections: fast."),
    _JOBS,
    click.option(
        "--format",
        type=click.Choice(["text", "json", "github", "junit"]),
        default="text",
        show_default=True,
        help="How to print the answer; github: as annotations.",
    ),
    _AS_JSON,
    _TO_FILE,
    _QUIET,
    _COLOR,
]
_RECORD = [_JOBS, _QUIET, _COLOR]
_DESIGN = [
    _CASE,
    click.option("--all-cases", is_flag=True, help="Every case of the file."),
    _LET,
    click.option("--drive", metavar="DRIVE", help="Which sources move: a drive or a source of the file."),
]
_SPAN = [
    click.option("--from", "low", metavar="F", help="Lowest frequency, in hertz or with a unit: 10kHz."),
    click.option("--to", "high", metavar="F", help="Highest frequency."),
]
_GRID = [
    click.option(
        "--per-decade", type=click.FloatRange(min=0, min_open=True), metavar="N", help="Points per decade."
    ),
    click.option(
        "--at", multiple=True, metavar="F", help="Only this frequency (0 for the limit); may be repeated."
    ),
    click.option("--node", multiple=True, metavar="NODE", help="Show this node too; may be repeated."),
]


def _options(*groups: list[Callable[[Any], Any]]) -> Callable[[_Command], _Command]:
    """Declare options on a command; the shared ones arrive as one `Options`."""
    names = {field.name for field in dataclasses.fields(Options)}

    def declare(command: _Command) -> _Command:
        def gather(**given: Any) -> Any:
            shared = {name: given.pop(name) for name in list(given) if name in names}
            return command(Options(**shared), **given)

        gather.__name__, gather.__doc__ = command.__name__, command.__doc__
        decorated: Any = gather
        for option in reversed([option for group in groups for option in group]):
            decorated = option(decorated)
        return decorated  # type: ignore[no-any-return]

    return declare


@click.group(
    cls=Tool,
    no_args_is_help=False,
    context_settings={"help_option_names": ["-h", "--help"], "max_content_width": 100},
)
@click.version_option(__version__, prog_name="nodal", message="%(prog)s %(version)s")
def main() -> None:
    """What a voltage probe and everything behind it shows, against what was there.

    FILE is a text description of the measuring chain (`-` for standard input).
    """


# Commands


@main.command()
@click.argument("file")
@_options(_SPAN, _GRID, _DESIGN, _OUTPUT)
def sweep(
    options: Options,
    file: str,
    low: str | None,
    high: str | None,
    per_decade: float | None,
    at: tuple[str, ...],
    node: tuple[str, ...],
) -> None:
    """Transfer functions and loading over frequency.

    Every reading and contact of FILE, per unit of the drive. The frequencies are those of the file's `sweep`
    unless given.
    """
    from nodal.report import answers, data, terminal
    from nodal.response import Unavailable

    if at and (low or high or per_decade):
        raise click.UsageError("--at does not go with --from, --to or --per-decade")
    design = _load(file)
    models = _models(design, options, default_all=False)
    found: dict[str, answers.SweepAnswer] = {}
    pages: list[str] = []
    for case, model in models.items():
        response = model.response
        drive = _drive(response.network, options.drive)
        _check_nodes(response.network, node)
        frequencies = _listed(at) if at else _grid(response.network, low, high, per_decade)
        points: list[answers.Point | None] = [None] * frequencies.size
        total = None
        if options.form == "text" and not at:
            total = frequencies.size
            frequencies, points = _thinned(response, frequencies, drive)
            total = None if points.count(None) == total and len(points) == total else total
        try:
            found[case] = answers.sweep(response, frequencies, drive, node)
        except Unavailable as why:
            _fail("no-solution", reason=str(why))
        if options.form == "text":
            page = _page(options)
            terminal.sweep(page, case, design.title, found[case], points, total)
            pages.append(page.text())
    if options.form == "json":
        cases = {case: data.sweep_case(answer) for case, answer in found.items()}
        text = data.dumps(data.envelope(file, cases))
    elif options.form == "csv":
        text = data.sweep_csv(found)
    else:
        text = "\n".join(pages)
    _finish(design, options, text)


@main.command(short_help="Figures of merit of every reading and contact.")
@click.argument("file")
@click.option("--for-diff", is_flag=True, help="As git's diff shows it: the text, then a figure a line.")
@_options(_SPAN, _DESIGN, _OUTPUT)
def figures(options: Options, file: str, low: str | None, high: str | None, for_diff: bool) -> None:
    """Figures of merit of every reading and contact, all cases side by side.

    Those that the file's requirements ask about are among them. --case chooses cases. With --for-diff, which
    is for git to call, a file with errors gives these as its answer, at status 0.
    """
    from nodal.report import answers, data, terminal

    if for_diff:
        from nodal.report import diffing

        _for_git(lambda: diffing.for_diff(file), options)
        return
    design = _load(file)
    models = _models(design, options, default_all=True)
    responses = {case: model.response for case, model in models.items()}
    drives = {case: _drive(response.network, options.drive) for case, response in responses.items()}
    lacking = next((r.network for r in responses.values() if r.network.grid is None), None)
    first = next(iter(responses.values())).network
    span = _span(lacking or first, low, high) if low or high or lacking else None
    answer = answers.figures(responses, options.drive, span)
    if options.form == "json":
        cases = {case: data.figures_case(results) for case, results in answer.cases.items()}
        text = data.dumps(data.envelope(file, cases))
    elif options.form == "csv":
        text = data.figures_csv(answer)
    else:
        page = _page(options)
        several = any(len(response.network.drives) > 1 for response in responses.values())
        shown = next(iter(drives.values())) if several else None
        terminal.figures(page, file, design.title, shown, answer)
        caution = terminal.caution(response.network for response in responses.values())
        if caution:
            page.add("", caution)
        text = page.text()
    _finish(design, options, text)


@main.command(short_help="What readings and contacts do after an edge.")
@click.argument("file")
@click.option("--edge", "ramp", metavar="T", help="A linear ramp of whole duration T, in seconds or as 1ns.")
@click.option("--step", "step", is_flag=True, help="An ideal step.")
@click.option("--over", metavar="T", help="How long it is watched.")
@click.option("--points", type=click.IntRange(min=2, max=100_000), metavar="N",
              help="Most samples: 500 unless given; the text table has fewer.")  # fmt: skip
@_options(_DESIGN, _OUTPUT)
def edge(
    options: Options, file: str, ramp: str | None, step: bool, over: str | None, points: int | None
) -> None:
    """What readings and contacts do after an edge, in volts, and the figures of it.

    Every reading, and every contact loaded and undisturbed, in all cases, for the `edge` or `step` of FILE
    unless given. Samples stand where the curves move. --case chooses cases.
    """
    from dataclasses import replace

    from nodal.figure_set import edge_figures
    from nodal.report import data, terminal
    from nodal.report import edge as report
    from nodal.response import Response, Unavailable

    if ramp is not None and step:
        raise click.UsageError("--edge does not go with --step")
    design = _load(file)
    models = _models(design, options, default_all=True)
    wanted = "0" if step else ramp
    found: dict[str, report.EdgeAnswer] = {}
    for case, model in _slow(models.items(), len(models), options):
        network = replace(model.network, stimulus=_stimulus(model.network, wanted, over))
        try:
            drive = _drive(network, options.drive)
            found[case] = report.answer(Response(network), drive, points, text=options.form == "text")
        except Unavailable as why:
            _fail("no-solution", reason=f"case {case}: {why}" if len(models) > 1 else str(why))
    if options.form == "json":
        text = data.dumps(data.envelope(file, {case: report.edge_case(a) for case, a in found.items()}))
    elif options.form == "csv":
        text = report.edge_csv(found)
    else:
        page = _page(options)
        for case, answer in found.items():
            report.edge_text(page, case, design.title, answer)
        figures = edge_figures({case: answer.response for case, answer in found.items()}, options.drive)
        if figures.rows:
            terminal.figure_table(page, figures)
        caution = terminal.caution(answer.response.network for answer in found.values())
        if caution:
            page.add("", caution)
        text = page.text()
    _finish(design, options, text)


def _stimulus(network: Any, ramp: str | None, over: str | None) -> Any:
    """The edge of the call, what is left out taken from the file's."""
    from nodal.network import Stimulus

    own = network.stimulus
    if own is None and ramp is None:
        _fail("no-edge", reason="the file has no edge and the call gives none",
              hint="add --edge 1ns --over 100ns, or the statement: edge 1 ns over 100 ns")  # fmt: skip
    if own is None and over is None:
        _fail("no-edge", reason="the file does not say how long the edge is watched", hint="add --over 100ns")
    rises = own.ramp if ramp is None else _time(ramp)
    window = own.window if over is None else _time(over)
    top = own.top_at if own is not None else None
    if not window > 0.0:
        _fail("bad-edge", problem="the edge is watched for no time", hint="give --over more than zero")
    if rises > window:
        _fail("bad-edge", problem="the edge takes longer than it is watched", hint="give --over more")
    if top is not None and top > window:
        _fail("bad-edge", problem="the top is read after the time watched", hint="give --over more")
    return Stimulus(rises, window, top)


@main.command()
@click.argument("file")
@click.option("--lumped", is_flag=True, help="Take cables, loss and delays for lumped parts, as a guide.")
@_options(_DESIGN, _OUTPUT)
def poles(options: Options, file: str, lumped: bool) -> None:
    """Poles of the network and zeros of each reading.

    With natural frequency, damping ratio and time constant; unstable ones are flagged. Networks with cables,
    dielectric loss or delays have no finite set of them: --lumped gives what the lumped parts make.
    """
    from nodal.poles import PolesAndZeros, poles_and_zeros, unlumped
    from nodal.report import data
    from nodal.report import edge as report
    from nodal.response import Unavailable

    design = _load(file)
    models = _models(design, options, default_all=False)
    found: dict[str, PolesAndZeros] = {}
    for case, model in models.items():
        network = model.network
        try:
            found[case] = poles_and_zeros(network, _drive(network, options.drive), lumped=lumped)
        except Unavailable as why:
            hint = "add --lumped for what the lumped parts make" if unlumped(network) and not lumped else ""
            _fail("no-poles", reason=str(why), hint=hint)
    if options.form == "json":
        cases = {case: report.poles_case(each) for case, each in found.items()}
        text = data.dumps(data.envelope(file, cases))
    elif options.form == "csv":
        text = report.poles_csv(found)
    else:
        page = _page(options)
        for case, each in found.items():
            report.poles_text(page, case, design.title, each)
        text = page.text()
    _finish(design, options, text)


@main.command()
@click.argument("designs", nargs=-1, required=True, metavar="OLD NEW")
@click.option("--as-git-driver", is_flag=True, help="Take what git gives an external diff driver.")
@click.option("--exit-code", is_flag=True, help="Status 1 where anything differs.")
@_options(_COMPARE, _output("json"))
def compare(options: Options, designs: tuple[str, ...], as_git_driver: bool, exit_code: bool) -> None:
    """What changed between two designs, or two states of one.

    Values of the text part by part, figures that moved, requirements with another answer, cases added or
    gone. OLD and NEW are files, REVISION:path or :path (what git has staged); includes come from the same
    revision. As in git, such a path runs from the top of the repository, or from here if it begins with ./
    """
    if as_git_driver:
        from nodal.report import diffing

        _for_git(lambda: diffing.driver(designs, lambda: _page(options)), options)
        return
    from nodal import revisions
    from nodal.report import comparison as report
    from nodal.report import data
    from nodal.studies.compare import compare as compare_designs

    if len(designs) != 2:
        raise click.UsageError("compare takes two designs, OLD and NEW")
    before, after = revisions.load_both(*designs)
    known = list(dict.fromkeys((*before.cases, *after.cases)))
    for case in options.case:
        if case not in known:
            _fail("unknown-case", name=case, hint=_nearest(case, known))
    if options.drive is not None:
        for design in (before, after):
            _drive(design.network().network, options.drive)
    answer = compare_designs(before, after, cases=options.case or None, drive=options.drive)
    if options.form == "json":
        text = data.dumps(report.as_data(answer))
    else:
        page = _page(options)
        report.text(page, answer)
        text = page.text()
    _finish(after, options, text)
    if exit_code and answer.differs:
        raise click.exceptions.Exit(FAILED)


class _Survives:
    """Says what went wrong in place of failing: git gives up a whole log when a driver of one file fails."""

    def __init__(self, options: Options) -> None:
        self.options = options

    def __enter__(self) -> None:
        return

    def __exit__(self, kind: type[BaseException] | None, error: BaseException | None, trace: object) -> bool:
        if error is None or not isinstance(error, Exception) or isinstance(error, BrokenPipeError):
            return False
        _write(f"nodal failed here, which is a mistake in it: {error!r}\n", self.options)
        return True


def _for_git(answer: Callable[[], str], options: Options) -> None:
    with _Survives(options):
        _write(answer(), options)


@main.command(short_help="What an error, warning or note means.")
@click.argument("code", required=False)
@_options(_output("json"))
def explain(options: Options, code: str | None) -> None:
    """What an error, warning or note means; without CODE, a list of all."""
    from nodal.language.codes import BY_CODE, TABLE
    from nodal.report import data, listing

    if code is not None and code not in BY_CODE:
        _fail("unknown-code", name=code, hint=_nearest(code, BY_CODE))
    rows = TABLE if code is None else (BY_CODE[code],)
    if options.form == "json":
        head = {"format": data.FORMAT, "tool": f"nodal {__version__}"}
        text = data.dumps({**head, "codes": listing.as_data(rows)})
    elif code is None:
        page = _page(options)
        listing.overview(page, rows)
        text = page.text()
    else:
        page = _page(options)
        listing.explanation(page, rows[0])
        text = page.text()
    _write(text, options)


@main.command()
@click.argument("paths", nargs=-1, required=True, metavar="PATH...")
@_options(_TIDY)
def tidy(options: Options, paths: tuple[str, ...], check: bool, diff: bool) -> None:
    """Write files in their canonical form; what they say stays.

    Each PATH is a file, a folder whose .nodal files are meant, or - (standard input to standard output).
    A file with errors is left alone. With --check or --diff the status is 1 where a file is not tidy.
    """
    from nodal.language.diagnostics import Collector, DesignError, visible
    from nodal.paths import STANDARD_INPUT, find
    from nodal.tidying import tidied

    collector = Collector()
    untidy = False
    for path in find(paths, collector):
        try:
            file = tidied(path)
            named = f"{'not tidy' if check else 'tidied'}: {visible(file.label)}\n"
            if diff:
                _write(_painted(file.difference(), options.color), options)
            elif path == STANDARD_INPUT and not check:
                _write_bytes(file.after.encode())
                continue
            elif file.changes and not check:
                _replace(path, file.after)
            untidy = untidy or file.changes
            if file.changes and not (diff or options.quiet):
                _write(named, options)
        except DesignError as error:
            collector.found += error.diagnostics
            collector.sources |= error.sources
    if collector.failed:
        raise DesignError(collector.found, collector.sources)
    if untidy and (check or diff):
        raise click.exceptions.Exit(FAILED)


@main.command(short_help="Hold designs to their requirements and recorded figures.")
@click.argument("paths", nargs=-1, required=True, metavar="PATH...")
@_options(_CHECK)
def check(
    options: Options, paths: tuple[str, ...], dependents: bool, no_solve: bool, jobs: int | None
) -> None:
    """Hold designs to their requirements, and to the figures recorded beside them.

    Each PATH is a file, a folder whose .nodal files are meant, or - for standard input; a record stands for
    its design. Every `require` of every case is answered with what was asked, what was found and the margin:
    what is left of the limit, or of the tolerance for `=`, negative where it is missed. A file without source
    or reading is a shared file, checked where it is included: with --dependents every design of the
    repository that includes a PATH is checked too.

    Where a record stands beside a design (see `nodal record`), figures that moved beyond its tolerance, are
    new, stale or no longer reached fail. With --let records are not looked at.

    Status: 0 all well; 1 a requirement or a recorded figure failed; 2 a file has errors, or a required figure
    cannot be computed.
    """
    from nodal.checking import Wanted, check_files, found, worst
    from nodal.dependents import designs_of, with_dependents
    from nodal.language.diagnostics import Collector
    from nodal.paths import find
    from nodal.report import checks

    collector = Collector()
    files = find(designs_of(paths, collector), collector)
    if dependents:
        files = with_dependents(files)
    wanted = Wanted(options.case, _lets(options), solve=not no_solve)
    answers = list(_progress(check_files(files, wanted, jobs), len(files), options))
    known = dict.fromkeys(case for answer in answers for case in answer.cases)
    for case in options.case:
        if case not in known and all(answer.kind != "broken" for answer in answers):
            _fail("unknown-case", name=case, hint=_nearest(case, known))
    diagnostics, sources = found(answers, collector, warnings=not options.quiet)
    if options.form == "text":
        color = options.color if options.output is None or options.color == "always" else "never"
        text = checks.text(answers, _brush(color))
    elif options.form == "json":
        single = len(paths) == 1 and files == list(paths)
        text = checks.json_text(answers, diagnostics, sources, single=single)
    elif options.form == "github":
        text = checks.github_text(answers, diagnostics, sources)
    else:
        text = checks.junit_text(answers)
    if options.form in ("text", "junit"):
        _show(diagnostics, sources, options.color)
    if answers or options.form != "text":
        _write(text, options)
    status = WRONG if collector.failed else worst(answers)
    if status:
        raise click.exceptions.Exit(status)


@main.command(short_help="Write figures beside each design, to compare with.")
@click.argument("paths", nargs=-1, required=True, metavar="PATH...")
@_options(_RECORD)
def record(options: Options, paths: tuple[str, ...], jobs: int | None) -> None:
    """Write the figures of every case into a file beside each design, for `nodal check` to compare with.

    Each PATH is a file or a folder whose .nodal files are meant. The figures of bench_probe.nodal go to
    bench_probe.figures.toml, one a line, sorted, with nine digits. Lines that still hold stay as they are;
    tolerances and comments set by hand are kept.
    """
    from nodal.checking import found, record_files, worst
    from nodal.language.diagnostics import Collector
    from nodal.paths import STANDARD_INPUT, find
    from nodal.report import checks

    if STANDARD_INPUT in paths:
        raise click.UsageError("a record stands beside a file, so that - cannot be recorded")
    collector = Collector()
    files = find(paths, collector)
    answers = list(_progress(record_files(files, jobs), len(files), options))
    _show(*found(answers, collector, warnings=not options.quiet), options.color)
    _write(checks.record_text(answers), options)
    status = WRONG if collector.failed else worst(answers)
    if status:
        raise click.exceptions.Exit(status)


_Answer = TypeVar("_Answer")


def _progress(answers: Iterator[_Answer], total: int, options: Options) -> Iterator[_Answer]:
    """The same answers, with a bar on the terminal while they come."""
    if total < 2 or not sys.stderr.isatty():
        yield from answers
        return
    from rich.console import Console
    from rich.progress import Progress

    console = Console(stderr=True, no_color=not _colored(sys.stderr, options.color))
    with Progress(console=console, transient=True) as bar:
        yield from bar.track(answers, total=total, description="")


_Item = TypeVar("_Item")


def _slow(items: Iterable[_Item], total: int, options: Options) -> Iterator[_Item]:
    """The same items, with a bar on the terminal for what takes beyond a second."""
    import time

    if options.quiet or not sys.stderr.isatty():
        yield from items
        return
    from rich.console import Console
    from rich.progress import Progress

    console = Console(stderr=True, no_color=not _colored(sys.stderr, options.color))
    bar = Progress(console=console, transient=True)
    started = time.monotonic()
    try:
        for done, item in enumerate(items):
            if done and not bar.tasks and time.monotonic() - started > 1.0:
                bar.add_task("", total=total)
                bar.start()
            if bar.tasks:
                bar.update(bar.tasks[0].id, completed=done)
            yield item
    finally:
        if bar.tasks:
            bar.stop()


def _brush(color: str) -> Callable[[str, str], str]:
    """Paints words where color is wanted on standard output."""
    colored = _colored(sys.stdout, color)
    return lambda text, shade: click.style(text, fg=shade) if colored else text


def _painted(difference: str, color: str) -> str:
    """A unified diff, in colors where they are wanted."""
    if not _colored(sys.stdout, color):
        return difference
    shades = {"+": "green", "-": "red", "@": "cyan"}
    lines = difference.split("\n")
    return "\n".join(click.style(line, fg=shades[line[0]]) if line[:1] in shades else line for line in lines)


# What the commands share


def _load(file: str) -> Design:
    from nodal.design import load

    return load(file)


def _models(design: Design, options: Options, *, default_all: bool) -> dict[str, Model]:
    """The models of the cases asked for, by name."""
    if options.case and options.all_cases:
        raise click.UsageError("--case does not go with --all-cases")
    lets: dict[str, Any] = _lets(options)
    for case in options.case:
        if case not in design.cases:
            _fail("unknown-case", name=case, hint=_nearest(case, design.cases))
    cases = options.case or (design.cases if options.all_cases or default_all else design.cases[:1])
    models = {case: design.network(case, **lets) for case in dict.fromkeys(cases)}
    for model in models.values():
        design.diagnostics += [d for d in model.diagnostics if d not in design.diagnostics]
    return models


def _lets(options: Options) -> dict[str, str]:
    """What --let says, by name."""
    lets: dict[str, str] = {}
    for text in options.let:
        name, equals, value = text.partition("=")
        if not equals or not name.strip() or not value.strip():
            _fail("bad-let", text=text, hint="write --let NAME=VALUE, as in --let lead_length=50mm")
        lets[name.strip()] = value.strip()
    return lets


def _drive(network: Any, asked: str | None) -> str:
    """The name of the drive to use."""
    names = [drive.name for drive in network.drives]
    if asked is not None:
        if asked not in names:
            _fail("unknown-drive", name=asked, hint=_nearest(asked, names))
        return asked
    if network.default_drive is None:
        _fail("drive-needed", names=", ".join(names))
    return str(network.default_drive)


def _check_nodes(network: Any, names: Sequence[str]) -> None:
    for name in names:
        try:
            network.node(name)
        except KeyError:
            _fail("unknown-node", name=name, hint=_nearest(name, network.nodes))


_NUMBER = r"\s*([0-9]+(?:\.[0-9]+)?(?:[eE][-+]?[0-9]{1,3})?)\s*(\S*)\s*"


def _time(text: str) -> float:
    """Seconds from "1e-9", "10ns", "0"."""
    import math
    import re

    from nodal.language import units

    found = re.fullmatch(_NUMBER, text)
    scanned = units.scan_unit(found[2]) if found and found[2] else "s"
    if found is None or scanned is None or units.dimension_of(scanned) != units.SECOND:
        hint = "write seconds or a number in s, ms, µs, ns or ps"
        _fail("bad-edge", problem=f'"{text}" is not a time', hint=hint)
    value = units.to_number(found[1], scanned)
    if not math.isfinite(value):
        _fail("bad-edge", problem=f'"{text}" is not a time', hint="it is beyond any number")
    return value


def _frequency(text: str) -> float:
    """Hertz from "1e6", "10MHz", "10 kHz", "0"."""
    import math
    import re

    from nodal.language import units

    found = re.fullmatch(_NUMBER, text)
    if found is None:
        _fail("bad-frequency", text=text, hint="write hertz or a number with a unit: 1e6, 10MHz, 0")
    digits, unit = found.groups()
    scanned = units.scan_unit(unit) if unit else "Hz"
    if scanned is None or units.dimension_of(scanned) != units.HERTZ:
        near = units.nearest_unit(unit, units.HERTZ)
        fits = near is not None and units.dimension_of(near) == units.HERTZ
        hint = f"write {digits}{near}" if fits else "write hertz or a number in Hz, kHz, MHz or GHz"
        _fail("bad-frequency", text=text, hint=hint)
    value = units.to_number(digits, scanned)
    if not math.isfinite(value):
        _fail("bad-frequency", text=text, hint="it is beyond any number")
    return value


def _span(network: Any, low: str | None, high: str | None) -> Span:
    """The span of the call, an end that is left out taken from the file's sweep."""
    own = network.grid
    if own is None and (low is None or high is None):
        _fail("no-sweep")
    span = (own.low if low is None else _frequency(low), own.high if high is None else _frequency(high))
    if not 0.0 < span[0] < span[1]:
        from nodal.report.numbers import frequency

        _fail("bad-span", low=frequency(span[0]), high=frequency(span[1]))
    return span


def _grid(network: Any, low: str | None, high: str | None, per_decade: float | None) -> Floats:
    import math

    from nodal.figures.search import MOST_POINTS, sweep_points
    from nodal.network import SweepGrid

    span = _span(network, low, high)
    density = per_decade or (network.grid.per_decade if network.grid else 40.0)
    count = math.log10(span[1] / span[0]) * density
    if count > MOST_POINTS:
        _fail("too-many-points", count=f"{count:,.0f}", most=f"{MOST_POINTS:,}")
    return sweep_points(SweepGrid(span[0], span[1], density))


def _listed(at: Sequence[str]) -> Floats:
    import numpy as np

    return np.array([_frequency(text) for text in at])


_SHORT_SWEEP = 25
"""Points of a sweep that are all shown as text."""


def _thinned(response: Any, frequencies: Floats, drive: str) -> tuple[Floats, list[Any]]:
    """Rows of the text table: whole decades and both ends of a long sweep, and points of interest."""
    import numpy as np

    from nodal.report.answers import points_of_interest, whole_decades

    span = (float(frequencies[0]), float(frequencies[-1]))
    if frequencies.size <= _SHORT_SWEEP:
        kept = frequencies
    else:
        decades = np.array(whole_decades(span))
        whole = np.searchsorted(frequencies, decades * (1.0 - 1e-9))
        kept = frequencies[np.unique([0, *whole, frequencies.size - 1])]
    interest = points_of_interest(response, span, drive) if span[0] < span[1] else []
    rows: list[tuple[float, Any]] = [(float(f), None) for f in kept]
    rows += [(point.frequency, point) for point in interest]
    rows.sort(key=lambda row: row[0])
    return np.array([f for f, _ in rows]), [point for _, point in rows]


def _nearest(name: str, among: Any) -> str:
    """A help line: the nearest of the names, else all of them where they are few."""
    import difflib

    names = [str(known) for known in among]
    close = difflib.get_close_matches(name, names, 1, 0.5)
    if close:
        return f'did you mean "{close[0]}"?'
    return f"there are: {', '.join(names)}" if 0 < len(names) <= 12 else ""


def _fail(code: str, **arguments: Any) -> NoReturn:
    """Stop with a finding of the table that has no place in a file."""
    from nodal.language.codes import make

    raise DesignError([make(code, None, arguments=arguments)], {})


def _wrong_call(mistake: click.UsageError) -> DesignError:
    from nodal.language.codes import make

    problem = mistake.format_message().rstrip(".")
    problem = problem[:1].lower() + problem[1:]
    path = mistake.ctx.command_path if mistake.ctx is not None else "nodal"
    hint = f"see {path} --help"
    return DesignError([make("wrong-call", None, arguments={"problem": problem, "hint": hint})], {})


def _report(error: DesignError, arguments: Sequence[str]) -> int:
    """Print what is wrong: as JSON on standard output where JSON was asked for, else as text on standard
    error."""
    from nodal.language.diagnostics import as_json

    words = [*arguments, ""]
    pairs = list(itertools.pairwise(words))
    if "--json" in words or "--format=json" in words or ("--format", "json") in pairs:
        from nodal.report.data import dumps

        sys.stdout.write(dumps({"diagnostics": as_json(error.diagnostics, error.sources)}))
    else:
        color = dict(pairs).get("--color") or next((w[8:] for w in words if w.startswith("--color=")), "auto")
        _show(error.diagnostics, error.sources, color)
    return WRONG


def _show(diagnostics: Sequence[Diagnostic], sources: Mapping[str, str], color: str) -> None:
    from nodal.language.diagnostics import render

    sys.stderr.write(render(diagnostics, sources, color=_colored(sys.stderr, color)))


def _colored(stream: IO[str], color: str) -> bool:
    if color != "auto":
        return color == "always"
    plain = bool(os.environ.get("NO_COLOR")) or os.environ.get("TERM") == "dumb"
    return not plain and stream.isatty()


def _page(options: Options) -> Page:
    """A page as wide as the terminal, 100 columns where there is none; never colored in a file."""
    import shutil

    from nodal.report.terminal import Page

    to_file = options.output is not None
    width = 100 if to_file else shutil.get_terminal_size((100, 24)).columns
    color = options.color == "always" if to_file else _colored(sys.stdout, options.color)
    return Page(width, color=color)


def _finish(design: Design, options: Options, text: str) -> None:
    """Write an answer; warnings and notes go to standard error."""
    if design.diagnostics and not options.quiet:
        _show(design.diagnostics, design.sources, options.color)
    _write(text, options)


_PIECE = 8192


def _write(text: str, options: Options) -> None:
    if options.output is None or options.output == "-":
        # In pieces: one large write to a pipe whose reader leaves can end short and silent.
        for start in range(0, len(text), _PIECE):
            sys.stdout.write(text[start : start + _PIECE])
    else:
        _replace(options.output, text)


def _write_bytes(data: bytes) -> None:
    """A text for other programs: UTF-8 whatever the terminal is set to."""
    stream = sys.stdout.buffer
    for start in range(0, len(data), _PIECE):
        stream.write(data[start : start + _PIECE])
    stream.flush()


def _replace(path: str, text: str) -> None:
    try:
        replace_file(path, text)
    except OSError as error:
        reason = error.strerror or str(error)
        _fail("cannot-write", path=path, reason=reason[:1].lower() + reason[1:], hint="")
