"""The front door: arguments -> one of the commands. What they do is in `commands`."""

import sys
from pathlib import Path
from typing import Annotated

import typer

from linkwatch import __version__
from linkwatch.errors import InputError, LinkwatchError, one_line

# The one kind of wrong usage that typer names in public shares this base with all the others.
WRONG_USAGE: type[Exception] = typer.BadParameter.__mro__[2]

app = typer.Typer(
    name="linkwatch",
    help=(
        "Counts the voice calls on a link from live packets and holds their exact cost against "
        "the admission budget."
    ),
    epilog=(
        "Reading call traffic may need consent or authority under local law. Figures are an aid "
        "and no guarantee. A limit must never refuse an emergency call."
    ),
    add_completion=False,
    rich_markup_mode=None,
    pretty_exceptions_enable=False,
)

PlanFile = Annotated[
    Path | None, typer.Option("--plan", metavar="FILE", help="What was promised (YAML).")
]
Port = Annotated[str | None, typer.Option("--tap", metavar="NIC", help="A live port.")]
CaptureOption = Annotated[
    Path | None, typer.Option("--capture", metavar="FILE", help="A capture file.")
]
SceneOption = Annotated[bool, typer.Option("--scene", help="The built-in scene.")]
Speed = Annotated[
    float | None,
    typer.Option("--speed", metavar="N", help="Times real time; default as fast as it goes."),
]
For = Annotated[
    float | None,
    typer.Option("--for", metavar="SECONDS", help="How long, by the time of the source."),
]
Every = Annotated[float, typer.Option("--every", metavar="SECONDS", help="Time between snapshots.")]
AsJson = Annotated[bool, typer.Option("--json", help="Answer in JSON.")]
JudgeIt = Annotated[bool, typer.Option("--judge", help="Exit 1 where the answer is bad news.")]


def _version(wanted: bool) -> None:
    if wanted:
        typer.echo(f"linkwatch {__version__}")
        raise typer.Exit


@app.callback(invoke_without_command=True)
def _options(
    context: typer.Context,
    version: Annotated[
        bool,
        typer.Option("--version", callback=_version, is_eager=True, help="Tell the version."),
    ] = False,
) -> None:
    del version
    if context.invoked_subcommand is None:
        typer.echo(context.get_help())


def _interval(every: float) -> float:
    if not 0.1 <= every <= 3600:
        raise InputError("--every", got=f"{every:g}", wanted="0.1 to 3600 seconds")
    return every


@app.command()
def watch(
    tap: Port = None,
    capture: CaptureOption = None,
    scene: SceneOption = False,
    plan: PlanFile = None,
    speed: Speed = None,
    for_: For = None,
    every: Every = 1.0,
    need_packets: Annotated[
        bool,
        typer.Option("--need-packets", help="End where packets may not be read."),
    ] = False,
) -> None:
    """Open the dashboard on a live port, a capture or the scene."""
    from linkwatch.commands import watching
    from linkwatch.run import Source

    if tap is None and speed is None:
        speed = 1.0
    source = Source(tap, capture, scene, speed, for_)
    raise typer.Exit(
        watching.board(source, plan, every_s=_interval(every), need_packets=need_packets)
    )


@app.command()
def demo(plan: PlanFile = None, speed: Speed = None) -> None:
    """Open the dashboard on the built-in scene: an invented cutover, no port needed."""
    from linkwatch.commands import watching
    from linkwatch.run import Source

    source = Source(scene=True, speed=1.0 if speed is None else speed)
    raise typer.Exit(watching.board(source, plan))


@app.command()
def read(
    capture: Annotated[Path, typer.Argument(metavar="CAPTURE", help="A capture file.")],
    plan: PlanFile = None,
    every: Every = 1.0,
    board: Annotated[
        bool, typer.Option("--board", help="Show it on the dashboard, in its own time.")
    ] = False,
    speed: Speed = None,
    as_json: AsJson = False,
    judge: JudgeIt = False,
) -> None:
    """Read a capture: every call in it, what it cost, and what was wrong."""
    from linkwatch.commands import watching
    from linkwatch.run import Source

    source = Source(capture=capture, speed=1.0 if board and speed is None else speed)
    if board:
        raise typer.Exit(watching.board(source, plan, every_s=_interval(every)))
    raise typer.Exit(
        watching.read(source, plan, every_s=_interval(every), as_json=as_json, judge=judge)
    )


@app.command()
def log(
    tap: Port = None,
    capture: CaptureOption = None,
    scene: SceneOption = False,
    plan: PlanFile = None,
    speed: Speed = None,
    for_: For = None,
    every: Every = 1.0,
    as_json: AsJson = False,
    judge: JudgeIt = False,
) -> None:
    """Print a line each second: calls, kbit/s against the budget, alarms."""
    from linkwatch.commands import watching
    from linkwatch.run import Source

    source = Source(tap, capture, scene, speed, for_)
    raise typer.Exit(
        watching.log(source, plan, every_s=_interval(every), as_json=as_json, judge=judge)
    )


@app.command()
def count(
    tap: Port = None,
    capture: CaptureOption = None,
    scene: SceneOption = False,
    plan: PlanFile = None,
    speed: Speed = None,
    for_: For = None,
    as_json: AsJson = False,
    judge: JudgeIt = False,
) -> None:
    """Say how many calls are up, and how many more there is room for."""
    from linkwatch.commands import watching
    from linkwatch.run import Source

    if tap is not None and for_ is None:
        for_ = watching.COUNT_S
    source = Source(tap, capture, scene, speed, for_)
    raise typer.Exit(watching.count(source, plan, as_json=as_json, judge=judge))


@app.command()
def cost(
    codec: Annotated[str, typer.Option("--codec", metavar="NAME", help="Such as G729.")],
    packet_ms: Annotated[
        float | None,
        typer.Option("--packet-ms", metavar="MS", help="Speech in a packet; default the codec's."),
    ] = None,
    framing: Annotated[
        str,
        typer.Option(
            "--framing", metavar="LAYERS", help="From the IP packet outwards, such as crtp,ppp."
        ),
    ] = "ethernet",
    ipv6: Annotated[bool, typer.Option("--ipv6", help="Over IPv6.")] = False,
    srtp_tag: Annotated[
        int, typer.Option("--srtp-tag", metavar="OCTETS", help="What SRTP adds, such as 10.")
    ] = 0,
    as_json: AsJson = False,
) -> None:
    """Say what one direction of one call costs on a link."""
    from linkwatch.commands.planning import print_cost

    typer.echo(
        print_cost(codec, packet_ms, framing, ipv6=ipv6, srtp_tag_octets=srtp_tag, as_json=as_json)
    )


@app.command()
def plan(
    file: Annotated[Path, typer.Argument(metavar="FILE", help="A plan (YAML).")],
    as_json: AsJson = False,
) -> None:
    """Work out a plan: what a call costs, how many fit, what the reserve leaves."""
    from linkwatch.commands.planning import print_plan
    from linkwatch.plan.planfile import load_plan

    typer.echo(print_plan(load_plan(file), as_json=as_json))


@app.command()
def taps(as_json: AsJson = False) -> None:
    """List the ports there are, and which may be read."""
    from linkwatch.commands.taps import print_taps
    from linkwatch.tap.ports import list_ports

    typer.echo(print_taps(list_ports(), as_json=as_json))


@app.command()
def bench(
    streams: Annotated[int, typer.Option("--streams", metavar="N")] = 1000,
    packets: Annotated[int, typer.Option("--packets", metavar="N")] = 1_000_000,
    as_json: AsJson = False,
) -> None:
    """Measure how fast this machine reads captures, beside other decoders."""
    from linkwatch.commands.bench import print_bench, run_bench

    typer.echo(print_bench(run_bench(streams, packets), as_json=as_json))


def main() -> None:
    """Runs the command line; every error a person can put right is one line on stderr."""
    try:
        status = app(standalone_mode=False)
    except LinkwatchError as error:
        print(f"linkwatch: {error}", file=sys.stderr)
        status = error.exit_status
    except WRONG_USAGE as error:
        said = getattr(error, "format_message", error.__str__)()
        print(f"linkwatch: {one_line(said)} See `linkwatch --help`.", file=sys.stderr)
        status = 2
    except (KeyboardInterrupt, typer.Abort):
        status = 130
    except BrokenPipeError:  # whoever read the answer has had enough of it
        sys.stderr.close()
        status = 0
    sys.exit(status or 0)
