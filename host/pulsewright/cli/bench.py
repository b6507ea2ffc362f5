"""bench new, bench show, bench serve: kept virtual sockets with a modelled chip and its faults."""

from __future__ import annotations

import argparse
from pathlib import Path
from typing import TYPE_CHECKING, Any

from pulsewright.cli.desk import Desk, Parser, add, add_group
from pulsewright.errors import UsageMistake

if TYPE_CHECKING:
    from pulsewright.virtual.bench import Bench

_SERVE = """\
The rig's clock runs on by itself only to its next heartbeat or answer; --real-time paces it by the wall. The port's
name is the first line of the answer; Ctrl-C ends it, and what the chip holds then is kept."""


def add_commands(commands: argparse._SubParsersAction[Parser]) -> None:
    """The commands of this group."""
    inner = add_group(
        commands,
        "bench",
        "kept virtual sockets, each with a modelled chip",
        "pulsewright bench new tower.bench --chip 27e512 --contents noise",
    )
    new = add(
        inner,
        "new",
        _new,
        what="make a kept bench: a virtual socket with a modelled chip, and faults if you like",
        example="pulsewright bench new tower.bench --chip 27e512 --contents tower-dump.bin --fault slow=30,6",
    )
    new.add_argument("bench", metavar="BENCH", help="the file it is kept in; `--rig virtual:BENCH` then works on it")
    new.add_argument("--chip", metavar="CHIP", required=True, help="the part whose model sits in the socket")
    new.add_argument(
        "--contents",
        metavar="WHAT",
        default="blank",
        help="blank (as it is without this), noise, noise:SEED, or an image file as in `burn`",
    )
    new.add_argument("--fault", metavar="NAME[=...]", action="append", default=[], help="a fault, as often as wanted")
    new.add_argument("--model", metavar="FILE", help="a Python file with make_chip() -> ChipModel, instead of ours")
    new.add_argument("--maker", metavar="NAME", default="", help="whose chip it is, where its makers' chips differ")
    new.add_argument(
        "--jumper",
        action="store_true",
        help="set the board's jumper, which parts without electronic ID and levels above 14.5 V ask for",
    )
    new.late = _faults_text
    show = add(
        inner,
        "show",
        _show,
        what="show a bench's chip and contents, and all that its pins have seen",
        example="pulsewright bench show tower.bench --json",
    )
    show.add_argument("bench", metavar="BENCH", help="the bench's file")
    show.add_argument("--save", metavar="FILE", help="write the chip's contents, as `read -o` does")
    serve = add(
        inner,
        "serve",
        _serve,
        what="serve a bench's virtual rig behind a port of its own, for --rig",
        example="pulsewright bench serve tower.bench",
        more=_SERVE,
    )
    serve.add_argument("bench", metavar="BENCH", help="the bench's file")
    serve.add_argument("--link", metavar="NAME", help="make this symbolic link to the port while it is served")
    serve.add_argument("--real-time", action="store_true", help="pace the rig's clock by the wall")


def _faults_text() -> str:
    from pulsewright.virtual.faults import FAULTS

    names = {name: f"{name}={form}" if form else name for name, (form, _) in FAULTS.items()}
    width = max(len(text) for text in names.values())
    lines = [f"  {names[name]:<{width}}  {about}" for name, (_, about) in FAULTS.items()]
    return "\n".join(["faults:", *lines])


def _new(args: argparse.Namespace, desk: Desk) -> int:
    from pulsewright.virtual.bench import Bench

    name = _chip_name(args.chip)
    contents: bytes | str = args.contents
    if _is_image(args.contents):
        contents = _image(args, name)
    elif args.contents.partition(":")[0] not in ("blank", "noise"):
        raise UsageMistake(
            f"no file is called {args.contents}, and no contents either",
            wanted="blank, noise, noise:SEED, or an image file",
            got=args.contents,
            hint="check the name and the folder",
        )
    bench = Bench.new(
        args.bench, name, contents=contents, faults=args.fault, model=args.model, maker=args.maker, jumper=args.jumper
    )
    facts = bench.report()
    lines = [f"{args.bench}: {_chip_text(bench)}, contents CRC-32 {facts['crc32'].upper()}"]
    if args.fault:
        lines.append(f"faults: {', '.join(args.fault)}")
    return desk.answer(lines, {**facts, "bench": args.bench, "maker": args.maker, "faults": args.fault})


def _chip_text(bench: Bench) -> str:
    return f"{bench.chip_name} of {bench.maker}" if bench.maker else bench.chip_name


def _chip_name(given: str) -> str:
    """The model's name: that of the definition, where a path is given."""
    if not Path(given).is_file():
        return given
    from pulsewright.chip.load import load

    return load(given).name


def _is_image(given: str) -> bool:
    """Whether the words name a file: FILE, FILE@ADDR or raw:FILE."""
    from pulsewright.image.load import RAW_MARK

    return Path(given).is_file() or given.startswith(RAW_MARK) or Path(given.rpartition("@")[0]).is_file()


def _image(args: argparse.Namespace, name: str) -> bytes:
    from pulsewright.image.memory import fit
    from pulsewright.image.several import load_files
    from pulsewright.virtual.bench import Bench

    other = [text for text in args.fault if text.startswith("other=")]
    chip = Bench(name, model=Path(args.model) if args.model else None, maker=args.maker, faults=other).chip
    return fit(load_files([args.contents])[0], len(chip.cells), blank=chip.erased_word & 0xFF, name=name).data


def _show(args: argparse.Namespace, desk: Desk) -> int:
    from pulsewright.image.load import save
    from pulsewright.virtual.bench import Bench

    bench = Bench.load(args.bench)
    facts = bench.report()
    if args.save:
        save(args.save, bytes(bench.chip.cells))
        facts["saved"] = args.save
    rest = {"maker": bench.maker, "faults": list(bench.faults.texts)}
    return desk.answer(_show_lines(bench, facts, args.save), {**facts, **rest})


def _show_lines(bench: Bench, facts: dict[str, Any], saved: str | None) -> list[str]:
    from pulsewright.report.modes import table
    from pulsewright.units import show_mv

    lines = [f"{_chip_text(bench)}, contents CRC-32 {facts['crc32'].upper()}"]
    lines.append(f"faults: {', '.join(bench.faults.texts) or 'none'}")
    signals = _signals(bench.faults.other or bench.chip_name)
    rows = [[pin, signals.get(int(pin), ""), show_mv(seen["max_mv"])] for pin, seen in facts["pins"].items()]
    lines += table(["pin", "signal", "highest"], rows) if rows else ["its pins have seen nothing yet"]
    lines.append(f"limits of the data sheet broken: {facts.get('violation_count', len(facts['violations']))}")
    lines += [
        f"  {one['rule']} at pin {one['pin']} after {one['at_us']} us: wanted {one['wanted']}, got {one['got']}"
        for one in facts["violations"]
    ]
    lines += [f"stressed: {text}" for text in facts["stressed"]]
    lines += [f"written by a probe: {text}" for text in facts["probe_wrote"]]
    lines.append("the chip is damaged" if facts["damaged"] else "the chip is not damaged")
    if saved:
        lines.append(f"contents written to {saved}")
    return lines


def _signals(name: str) -> dict[int, str]:
    """What a shipped definition of that name calls each pin; nothing where there is none."""
    from pulsewright.chip.load import load, shipped
    from pulsewright.chip.model import PACKAGE_PINS
    from pulsewright.report.pinout import pin_name

    if name not in {part.name for part in shipped()}:
        return {}
    definition = load(name)
    return {pin: pin_name(definition, pin) for pin in range(1, PACKAGE_PINS[definition.package] + 1)}


def _serve(args: argparse.Namespace, desk: Desk) -> int:
    from pulsewright.virtual.bench import Bench
    from pulsewright.virtual.serve import serve

    def ready(port: str) -> None:
        desk.answer([port], {"port": port})
        desk.say(f"serving {args.bench} at {port}: no hardware is touched; Ctrl-C ends it")

    link = Path(args.link) if args.link else None
    serve(Bench.load(args.bench), link=link, real_time=args.real_time, on_ready=ready)
    desk.say(f"kept in {args.bench}")
    return 0
