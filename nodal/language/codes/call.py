"""Findings about how the tool was called, and about records: nothing in a design raises them."""

from __future__ import annotations

from nodal.language.codes.row import Code

CALL: tuple[Code, ...] = (
    Code(
        "wrong-call",
        "error",
        "{problem}",
        "{hint}",
        "The command line is not one the tool understands. `nodal --help` lists the commands, "
        "`nodal COMMAND --help` the options of one.",
    ),
    Code(
        "unknown-case",
        "error",
        'there is no case "{name}"',
        "{hint}",
        "The option --case takes the name of a `case` in the file, or `nominal` for the file without any.",
    ),
    Code(
        "unknown-drive",
        "error",
        'there is no drive "{name}"',
        "{hint}",
        "The option --drive takes the name of a `drive` statement, or of a source to drive it alone.",
    ),
    Code(
        "unknown-node",
        "error",
        'there is no node "{name}"',
        "{hint}",
        "The option --node takes a node of the flat network: a name as written, or one inside a "
        "branch, assembly "
        "or chain such as `tip.1` or `column.7.bottom`.",
    ),
    Code(
        "drive-needed",
        "error",
        "several sources stand in the file and no drive says which of them moves",
        "add --drive with one of: {names}",
        "Everything is shown per unit of one drive. With several sources the first `drive` statement "
        "of the file is "
        "the default; without any, the call must choose with --drive. Each source is a drive of its "
        "own name.",
    ),
    Code(
        "bad-frequency",
        "error",
        '"{text}" is not a frequency',
        "{hint}",
        "Frequencies on the command line are hertz (1e6) or carry a unit (1MHz); they are not negative.",
    ),
    Code(
        "bad-let",
        "error",
        '"{text}" does not give a value to a name',
        "{hint}",
        "The option --let takes NAME=VALUE, where NAME is a `let` of the file and VALUE is written "
        "as in the file: "
        "--let lead_length=50mm.",
    ),
    Code(
        "no-sweep",
        "error",
        "the file has no sweep statement and the call gives no frequencies",
        "add --from and --to, or --at, or the statement: sweep 10 Hz to 1 GHz, 40 per decade",
        "The frequencies come from the options --at or --from and --to, else from the `sweep` of the file.",
    ),
    Code(
        "no-edge",
        "error",
        "{reason}",
        "{hint}",
        "The edge comes from the statement `edge` or `step` of the file, or from the options --edge or "
        "--step together with --over.",
    ),
    Code(
        "bad-edge",
        "error",
        "{problem}",
        "{hint}",
        "Times on the command line are seconds (1e-9) or carry a unit (1ns). The edge lies within the time "
        "it is watched for, which is above zero.",
    ),
    Code(
        "no-poles",
        "error",
        "{reason}",
        "{hint}",
        "A network of lumped parts has as many poles as it has independent capacitors and inductors. "
        "Cables, dielectric loss and delays have infinitely many, or none. With --lumped a cable counts as "
        "one section of inductance and capacitance, dielectrics as without loss, amplifiers as without "
        "delay: a guide to resonances far below the cable's quarter wave.",
    ),
    Code(
        "bad-span",
        "error",
        "a sweep from {low} to {high} is empty",
        "give --from a lower frequency than --to",
        "A sweep runs from a lower to a higher frequency, both above zero; 0 Hz is reached with --at 0.",
    ),
    Code(
        "too-many-points",
        "error",
        "the sweep would have {count} points; the most is {most}",
        "narrow the span or lower --per-decade",
        "A sweep has 2,000,000 points at most.",
    ),
    Code(
        "no-solution",
        "error",
        "{reason}",
        "",
        "The network was readable but has no unique solution at some frequency, so nothing can be printed.",
    ),
    Code(
        "cannot-write",
        "error",
        "cannot write {path}: {reason}",
        "{hint}",
        "The file could not be written. Nothing in it was changed: what is written goes to a temporary "
        "file beside it first, which takes its place when complete.",
    ),
    Code(
        "no-designs",
        "error",
        "there is no design in {path}",
        "a design is a file that ends in .nodal",
        "A folder was named, and neither it nor a folder in it holds a file that ends in .nodal. Folders "
        "whose names begin with a point are not searched.",
    ),
    Code(
        "process-died",
        "error",
        "a process that worked on one of the files ended before it had an answer",
        "try with --jobs 1",
        "Several files are worked on in processes of their own. One of them was ended from outside, perhaps "
        "for want of memory; no answer is complete without it.",
    ),
    Code(
        "record-syntax",
        "error",
        "{path} is not TOML: {reason}",
        "mend the line, or remove the file and write it anew with `nodal record`",
        "Recorded figures stand in a file beside the design that ends in .figures.toml. It is TOML; what is "
        "left of a merge (lines of < = >, the same figure twice) has to be settled by hand, or by recording "
        "anew.",
    ),
    Code(
        "record-form",
        "error",
        "{path}: {reason}",
        'a line of a record reads "bandwidth(screen)" = "167.3 MHz", perhaps "167.3 MHz ± 1 %"',
        "A record is TOML of one form: `format = 1`, a table [tolerance] and a table [case.NAME] for each "
        "case, with one figure a line, its value and unit in a string. A tolerance after ± is in %, in ppm "
        "or in the figure's unit. `nodal record` writes such files; it keeps tolerances and comments.",
    ),
    Code(
        "record-without-design",
        "error",
        "{path} records figures of {design}, which does not exist",
        "remove the record, or rename it with its design",
        "Recorded figures stand beside their design: those of bench_probe.nodal in bench_probe.figures.toml. "
        "A record was named, and there is no design beside it.",
    ),
    Code(
        "unknown-code",
        "error",
        'there is no code "{name}"',
        "{hint}",
        "`nodal explain` without a code lists them all.",
    ),
    Code(
        "no-git",
        "error",
        "git cannot be run: {reason}",
        "install git, or name files on disk",
        "What is named REVISION:path or :path is read through the program git, which was not found.",
    ),
    Code(
        "no-repository",
        "error",
        "there is no repository to read a revision from: {reason}",
        "REVISION:path and :path are looked for in the repository of the working folder",
        "What is named REVISION:path or :path stands in a git repository: the one that the working folder "
        "belongs to.",
    ),
    Code(
        "unknown-revision",
        "error",
        'there is no revision "{revision}"',
        "{hint}",
        "What stands before the colon of REVISION:path is whatever git takes for a revision: a branch, a "
        "tag, HEAD~1, a commit's name. With nothing before the colon, the index is meant.",
    ),
    Code(
        "not-in-revision",
        "error",
        "there is no file {path} in {revision}",
        "{hint}",
        "As in git itself, the path behind the colon runs from the top of the repository; one that begins "
        "with ./ or ../ runs from the working folder.",
    ),
    Code(
        "outside-repository",
        "error",
        "{path} is outside the repository",
        "",
        "A revision holds the files of its repository alone.",
    ),
)
