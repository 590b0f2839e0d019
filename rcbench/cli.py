"""The command line: one thin command a verb. Heavy imports stay inside the commands, so that --help is quick."""

from __future__ import annotations

import contextlib
import os
import sys
from collections.abc import Callable, Iterator
from pathlib import Path
from typing import Any, NoReturn

import click

from rcbench.errors import InputError

_EXISTING = click.Path(exists=True, path_type=Path)
_NEW = click.Path(path_type=Path)
_CONTEXT = {"help_option_names": ["-h", "--help"], "max_content_width": 110}


@click.group(context_settings=_CONTEXT)
@click.version_option(package_name="rcbench", message="%(version)s")
def cli() -> None:
    """Random circuit benchmarks: does a quantum processor spread information as its circuits say, how much of it does
    it keep, and was it this circuit?

    The path of a campaign: plan, build, (the device team runs the kit), check, compare, report. `run` does all steps
    that are ours; `demo` does them on an invented device.
    """


def main() -> None:
    """Run the command line; what the user can repair ends with status 2 and one message, Ctrl-C with 130."""
    try:
        status = cli.main(standalone_mode=False)
    except click.exceptions.Exit as stop:
        status = stop.exit_code
    except (click.Abort, KeyboardInterrupt):
        _interrupted()
    except click.ClickException as error:
        error.show()
        status = 2
    except InputError as error:
        status = _say(str(error), 2)
    except MemoryError:
        status = _say("memory: not enough for this work; allowed: fewer qubits, or a lower --memory-limit", 2)
    except BrokenPipeError:
        sys.stderr.close()
        status = 0
    except OSError as error:
        name = f"{error.filename}: " if error.filename else ""
        status = _say(f"{name}{error.strerror or error}", 2)
    sys.exit(status or 0)


def _interrupted() -> NoReturn:
    """End at once with 130; an ordinary exit would wait for threads, and may turn into a signal's status."""
    _say("interrupted; the same command goes on from here", 130)
    sys.stdout.flush()
    sys.stderr.flush()
    os._exit(130)


def _say(message: str, status: int) -> int:
    for line in message.splitlines():
        click.echo(f"rcbench: {line}", err=True)
    return status


@contextlib.contextmanager
def _steps() -> Iterator[Callable[[str], Callable[[int, int, str], None] | None]]:
    """Progress bars on a terminal, one a step; nothing in a pipe."""
    if not sys.stderr.isatty():
        yield lambda _: None
        return
    from rich.console import Console
    from rich.progress import BarColumn, MofNCompleteColumn, Progress, TextColumn, TimeRemainingColumn

    columns = (TextColumn("{task.description}"), BarColumn(), MofNCompleteColumn(), TimeRemainingColumn())
    with Progress(*columns, console=Console(stderr=True), transient=True) as bars:

        def step(title: str) -> Callable[[int, int, str], None]:
            task = bars.add_task(title, total=None)

            def show(done: int, total: int, what: str = "") -> None:
                bars.update(task, completed=done, total=total, description=f"{title} {what}")

            return show

        yield step


def _simulation_options(function: Callable[..., Any]) -> Callable[..., Any]:
    for option in (
        click.option(
            "--threads", type=click.IntRange(1, 1024), help="Threads; default: the cores this process may use."
        ),
        click.option("--memory-limit", type=float, metavar="GIB", help="Refuse work that needs more memory than this."),
        click.option("--double", is_flag=True, help="Simulate in complex128 instead of complex64."),
        click.option(
            "--trajectories", type=click.IntRange(16), help="Noise trajectories a circuit; default: by the margins."
        ),
    ):
        function = option(function)
    return function


def _options(threads: int | None, memory_limit: float | None, double: bool, trajectories: int | None) -> Any:
    from rcbench.predictions import Options

    if memory_limit is not None and not 0 < memory_limit < 1e6:
        raise InputError("--memory-limit", memory_limit, "a number of GiB above 0")
    return Options(
        trajectories=trajectories,
        dtype="complex128" if double else "complex64",
        memory_limit=int(memory_limit * 2**30) if memory_limit else None,
        threads=threads,
    )


_bit_order = click.option(
    "--bit-order",
    type=click.Choice(["q0-first", "q0-last"]),
    help="Which end of a bitstring is qubit 0, where the shots do not declare it.",
)
_strict = click.option("--strict", is_flag=True, help="End with status 1 if anything needs attention.")
_skip_bad = click.option("--skip-bad", is_flag=True, help="Set broken rows aside into a file instead of refusing.")


@cli.command()
@click.option("--out", type=_NEW, default=Path("rcbench-demo"), show_default=True, help="Folder for everything.")
def demo(out: Path) -> None:
    """Do the whole job on an invented device, into one folder."""
    from rcbench.demo import run_demo

    with _steps() as step:
        report, bottom_line = run_demo(out, progress=step)
    click.echo(f"report: {report}")
    click.echo(bottom_line)


@cli.command()
@click.argument("campaign", type=_EXISTING)
@click.option("--csv", "csv_file", type=_NEW, metavar="FILE", help="Write the table to a CSV file too.")
def plan(campaign: Path, csv_file: Path | None) -> None:
    """Say what precision a campaign buys, and what it costs in circuits, shots and device time."""
    from rcbench.files import write_csv
    from rcbench.plan import PLAN, plan_text
    from rcbench.plan import plan as make_plan

    table = make_plan(campaign)
    if csv_file is not None:
        write_csv(csv_file, table, PLAN)
    click.echo(plan_text(table))


@cli.command()
@click.argument("campaign", type=_EXISTING)
@click.option("--out", type=_NEW, required=True, help="Folder for the kit.")
@click.option("--format", "circuit_format", type=click.Choice(["qasm3", "qasm2", "cirq-json"]), help="Circuit files.")
@click.option("--missing", type=_EXISTING, metavar="SHOTS", help="Only the circuits that these shots lack.")
@click.option("--processes", type=click.IntRange(1, 256), help="Processes; default: the cores, for large kits only.")
@_bit_order
def build(
    campaign: Path,
    out: Path,
    circuit_format: str | None,
    missing: Path | None,
    processes: int | None,
    bit_order: str | None,
) -> None:
    """Write the circuits of a campaign, their roster and the hand-over note into a folder."""
    from rcbench.campaign import load_campaign
    from rcbench.kit import build_kit

    loaded = load_campaign(campaign)
    with _steps() as step:
        wanted = None
        if missing is not None:
            wanted = _missing(campaign, out, missing, bit_order)
        kit = build_kit(
            loaded,
            out,
            circuit_format=circuit_format,
            missing=wanted,
            progress=step("building circuits"),
            processes=processes or _processes(loaded),
        )
    click.echo(f"{out}: {len(kit.rows)} circuits to run; see HANDOVER.md")


def _processes(campaign: Any) -> int:
    """One process for a small kit: starting another costs more than it saves."""
    from rcbench.engine.threads import available_threads

    circuits = sum(experiment.instances * len(experiment.depths) for experiment in campaign.experiments)
    return available_threads() if circuits >= 1000 else 1


def _missing(campaign: Path, out: Path, shots: Path, bit_order: str | None) -> frozenset[str]:
    """The circuit ids that a partial return lacks, found by planning the whole kit in a temporary folder."""
    import tempfile

    from rcbench.campaign import load_campaign
    from rcbench.kit import build_kit
    from rcbench.shots.audit import missing_circuits
    from rcbench.shots.reader import read_shots

    out.parent.mkdir(parents=True, exist_ok=True)
    with tempfile.TemporaryDirectory() as folder:
        whole = build_kit(load_campaign(campaign), Path(folder) / "kit")
        return missing_circuits(whole, read_shots(shots, whole, bit_order=bit_order))


@cli.command()
@click.argument("source", type=_EXISTING, metavar="CAMPAIGN|KIT")
@click.option("--out", type=_NEW, help="Folder for the predictions.")
@click.option("--estimate", is_flag=True, help="Only say what it will cost, after a short timing of this machine.")
@_simulation_options
def predict(source: Path, out: Path | None, estimate: bool, **how: Any) -> None:
    """Predict every signature, for an ideal device and for the stated error budget."""
    options = _options(**how)
    if estimate:
        from rcbench.cost import cost_text, expected_cost

        click.echo(cost_text(expected_cost(source, options=options), options.memory_limit))
        return
    if out is None:
        raise InputError("--out", "nothing", "a folder for the predictions, or --estimate")
    from rcbench.files import read_provenance
    from rcbench.predictions import predict as predict_all

    with _steps() as step:
        table = predict_all(source, out, options=options, progress=step("predicting"))
    click.echo(f"{out / 'predictions.csv'}: {len(table)} rows in {_cost_of(read_provenance(out))}")


def _cost_of(facts: Any) -> str:
    """What a finished prediction took, from its provenance."""
    return (
        f"{facts.get('seconds')} s, of these {facts.get('evolution_seconds')} s evolution at "
        f"{float(facts.get('amplitudes_times_gates_per_second', 0)) / 1e9:.3g} billion amplitudes x gates a second; "
        f"peak memory {int(facts.get('peak_memory_bytes', 0)) / 2**20:.0f} MiB"
    )


@cli.command()
@click.argument("kit", type=_EXISTING)
@click.argument("shots", type=_EXISTING)
@click.option("--skip-bad", type=_NEW, metavar="FILE", help="Set broken rows aside into this file instead of refusing.")
@click.option("--quick", is_flag=True, help="Only what the files say; leave out what the shots give evidence of.")
@click.option("--apply", type=_NEW, metavar="OUT", help="Write mended shots into a new folder; the originals stay.")
@click.option(
    "--max-qubits",
    type=click.IntRange(1, 30),
    default=20,
    show_default=True,
    help="Larger circuits are not simulated; each qubit more doubles time and memory.",
)
@_bit_order
@_strict
def check(
    kit: Path,
    shots: Path,
    skip_bad: Path | None,
    quick: bool,
    apply: Path | None,
    max_qubits: int,
    bit_order: str | None,
    strict: bool,
) -> None:
    """Say what came back: complete, right circuits, right bit order?

    First what the files say. Then what the shots themselves give evidence of, with the ideal circuits simulated: shots
    of another circuit, bits in another order, stuck or inverted, the same shots twice, drift, another kit.
    """
    from rcbench.kit import read_kit
    from rcbench.shots.audit import check_shots
    from rcbench.shots.reader import read_shots

    if quick and apply is not None:
        raise InputError(
            "--apply", str(apply), "without --quick: what to mend is found by the examination it leaves out"
        )
    source = read_kit(kit)
    for row in source.rows:  # somebody may have run a circuit that was edited
        source.text(row)
    returned = read_shots(shots, source, bit_order=bit_order, skip_bad=skip_bad)
    found = check_shots(source, returned)
    click.echo("What the files say")
    click.echo(found.text())
    attention = found.needs_attention
    if not quick:
        from rcbench.shots.evidence.check import examine_files

        with _steps() as step:
            text, told = examine_files(
                source,
                shots,
                returned,
                bit_order=bit_order,
                max_qubits=max_qubits,
                apply=apply,
                progress=step("examining"),
            )
        click.echo(f"\n{text}")
        attention |= told
    raise click.exceptions.Exit(int(strict and attention))


@cli.command()
@click.argument("kit", type=_EXISTING)
@click.argument("shots", type=_EXISTING)
@click.option("--out", type=_NEW, required=True, help="Folder for the comparison.")
@click.option("--predictions", type=_EXISTING, help="Folder that `rcbench predict` filled for this kit.")
@_skip_bad
@_bit_order
@_strict
@_simulation_options
def compare(
    kit: Path,
    shots: Path,
    out: Path,
    predictions: Path | None,
    skip_bad: bool,
    bit_order: str | None,
    strict: bool,
    **how: Any,
) -> None:
    """Estimate every signature from the shots and compare it with both predictions."""
    from rcbench.verbs import compare as compare_all

    with _steps() as step:
        result = compare_all(
            kit,
            shots,
            out,
            bit_order=bit_order,
            skip_bad=skip_bad,
            predictions=predictions,
            options=_options(**how),
            progress=step("comparing"),
        )
    _finish(result, out, strict)


def _finish(result: Any, out: Path, strict: bool) -> None:
    counts = result.table["finding"].value_counts()
    click.echo(f"{out / 'comparison.csv'}: " + ", ".join(f"{counts[name]} {name}" for name in sorted(counts.index)))
    raise click.exceptions.Exit(int(strict and result.needs_attention))


@cli.command()
@click.argument("folder", type=_EXISTING, metavar="DIR")
def report(folder: Path) -> None:
    """Write the report of a comparison, or of a prediction alone: HTML, Markdown, tables and figures."""
    from rcbench.report.write import write_report

    click.echo(f"report: {write_report(folder)}")


@cli.command()
@click.argument("campaign", type=_EXISTING)
@click.argument("shots", type=_EXISTING)
@click.option("--out", type=_NEW, required=True, help="Folder for everything.")
@_skip_bad
@_bit_order
@_strict
@_simulation_options
def run(
    campaign: Path, shots: Path, out: Path, skip_bad: bool, bit_order: str | None, strict: bool, **how: Any
) -> None:
    """Build, predict, check, compare and report in one go."""
    from rcbench.verbs import run as run_all

    with _steps() as step:
        result, path = run_all(
            campaign, shots, out, bit_order=bit_order, skip_bad=skip_bad, options=_options(**how), progress=step
        )
    click.echo(f"report: {path}")
    _finish(result, out / "report", strict)


@cli.command()
@click.argument("circuits", type=_EXISTING)
@click.option("--out", type=_NEW, required=True, help="Folder for the kit.")
@click.option("--include", type=_EXISTING, multiple=True, help="Folder of the files that the circuits include.")
@click.option(
    "--protocol",
    type=click.Choice(["direct-sampling", "mirror-return"]),
    default="direct-sampling",
    show_default=True,
    help="What the circuits are for.",
)
@click.option("--targets", type=_EXISTING, help="CSV circuit_id,bitstring with the ideal outcomes (mirror-return).")
@click.option("--device", type=_EXISTING, help="TOML file with a [device] table and its error budget.")
@click.option("--margin", type=float, help="How far a signature may lie from its prediction and still agree.")
@click.option("--shots", type=click.IntRange(1), default=1000, show_default=True, help="Shots asked of each circuit.")
def adopt(
    circuits: Path,
    out: Path,
    include: tuple[Path, ...],
    protocol: str,
    targets: Path | None,
    device: Path | None,
    margin: float | None,
    shots: int,
) -> None:
    """Make a kit from a folder of OpenQASM files that already exist."""
    from rcbench.adopt import adopt as adopt_all

    kit = adopt_all(
        circuits,
        out,
        include_dirs=include,
        protocol=protocol,
        targets=targets,
        device_file=device,
        margin=margin,
        shots=shots,
    )
    click.echo(f"{out}: {len(kit.rows)} circuits adopted")


@cli.command()
@click.argument("name", required=False)
def protocols(name: str | None) -> None:
    """List the protocols, or print one with an example campaign."""
    from rcbench.protocol import load_protocol, protocol_text, shipped_protocols

    if name is None:
        for known in shipped_protocols():
            click.echo(f"{known:20} {load_protocol(known).title}")
        return
    click.echo(protocol_text(name))


if __name__ == "__main__":
    main()
