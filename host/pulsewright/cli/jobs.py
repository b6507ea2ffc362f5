"""identify, read, blank-check, erase, burn, verify: the jobs on a chip."""

from __future__ import annotations

import argparse
import os
from collections.abc import Callable
from contextlib import ExitStack
from dataclasses import replace
from typing import TYPE_CHECKING

from pulsewright.cli.desk import (
    HIGH_VOLTAGE,
    LICENSED,
    RIG_HELP,
    STATIC,
    UV,
    Desk,
    Handler,
    Parser,
    Stop,
    add,
    address,
    address_range,
    byte,
    count,
    prompt,
)
from pulsewright.errors import FileMistake, Where

if TYPE_CHECKING:
    from pulsewright.chip.model import Definition
    from pulsewright.image.memory import Fitted
    from pulsewright.jobs.context import JobContext, JobResult

Commands = argparse._SubParsersAction


def _common(parser: Parser) -> None:
    parser.add_argument("chip", metavar="CHIP", help="a shipped part (see `chips`) or the path of a definition")
    parser.add_argument("--rig", metavar="RIG", help=RIG_HELP)
    parser.add_argument("--maker", metavar="NAME", help="the maker row, where the ID alone does not tell")
    parser.add_argument(
        "--range", metavar="FIRST..LAST", type=address_range, help="the words to work on, such as 0x0000..0x7FFF"
    )
    parser.add_argument(
        "--accept-voltages",
        metavar="HASH",
        default="",
        help="agree to the voltages of the definition with this hash (a refusal prints both)",
    )


def _image_options(parser: Parser) -> None:
    parser.add_argument(
        "image",
        metavar="IMAGE",
        nargs="+",
        help="Intel HEX, S-records or raw binary, told apart by their content; several are one image. FILE@ADDR: its "
        "address 0 lands at image address ADDR; raw:FILE: its bytes as they are",
    )
    parser.add_argument(
        "--origin",
        metavar="ADDR",
        type=address,
        default=0,
        help="image address that lands at chip address 0 (default 0)",
    )
    parser.add_argument(
        "--fill", metavar="BYTE", type=byte, help="what belongs in words the image does not give (default: left alone)"
    )


def _changing(parser: Parser) -> None:
    parser.add_argument("--no-save", action="store_true", help="do not keep a file of what the chip held")
    parser.add_argument(
        "--vouch", metavar="TEXT", default="", help="what is printed on the chip: only for parts without electronic ID"
    )


def _protection(parser: Parser) -> None:
    parser.add_argument(
        "--protect",
        choices=("keep", "on", "off"),
        default="keep",
        help="what becomes of software protection, on parts that have it (default keep: as it is)",
    )


def _margins(parser: Parser) -> None:
    parser.add_argument(
        "--accept-shortfall",
        action="store_true",
        help="go on although the rig cannot make a margin that the definition names; the record keeps it",
    )


def add_commands(commands: Commands[Parser]) -> None:
    """The commands of this group."""
    raised = [HIGH_VOLTAGE, STATIC]

    def one(name: str, handler: Handler, what: str, example: str, more: str = "", last: tuple[str, ...] = ()) -> Parser:
        parser = add(
            commands, name, handler, what=what, example=f"pulsewright {example}", more=more, cautions=[*raised, *last]
        )
        _common(parser)
        return parser

    one("identify", _identify, "seating check and ID bytes", "identify 27e512 --rig virtual")
    reading = one(
        "read",
        _read,
        "read a chip into a file",
        "read 27e512 --rig virtual --passes 2 -o saved.bin",
        "Where the passes, or the margins of VCC, do not agree, FILE is not written: the bytes are listed with their\n"
        "values at each VCC and what that means, and every reading is kept in a file that the answer names.",
    )
    reading.add_argument(
        "-o",
        metavar="FILE",
        dest="out",
        required=True,
        help="the file: .hex .ihx Intel HEX; .s19 .s28 .s37 .srec .mot S-records; else raw binary",
    )
    reading.add_argument("--passes", metavar="N", type=count, default=1, help="read so often, and compare (default 1)")
    reading.add_argument(
        "--margins",
        action="store_true",
        help="read at the margins of VCC too, those of the definition's [verify] or the rig's lowest and highest "
        "step within VCC.read, and compare",
    )
    one("blank-check", _blank, "is every word in the erased state", "blank-check 27e512 --rig virtual")
    erasing = one(
        "erase",
        _erase,
        "erase a chip to blank, proven",
        "erase 27e512 --rig virtual",
        "What the chip holds is read in two passes and saved first.",
        (UV,),
    )
    _changing(erasing)
    _protection(erasing)
    burning = one(
        "burn",
        _burn,
        "burn an image, and verify it",
        "burn 27e512 image.hex --rig virtual --erase",
        "The chip is read in two passes and saved first; words that are right already are skipped. Each word is read\n"
        "back as it is burnt, then the whole is verified at margins of VCC.",
        (UV, LICENSED),
    )
    _image_options(burning)
    burning.add_argument(
        "--erase",
        action="store_true",
        help="erase the whole chip first, if a word needs a 0 to become a 1; refused where words outside --range "
        "would be lost",
    )
    _changing(burning)
    _protection(burning)
    _margins(burning)
    verifying = one(
        "verify",
        _verify,
        "compare a chip with an image",
        "verify 27e512 image.hex --rig virtual:tower",
        "",
        (LICENSED,),
    )
    _image_options(verifying)
    _margins(verifying)
    protecting = one(
        "protect",
        _protect,
        "software protection of parts that have it",
        "protect 28c256 on --rig virtual",
        "What the chip holds is read in two passes and saved first, and compared afterwards.",
    )
    protecting.add_argument("wanted", metavar="on|off|show", choices=("on", "off", "show"), help="what it is to be")
    _changing(protecting)


def _told(desk: Desk, fitted: Fitted) -> Fitted:
    """Says what each file was taken for, once the rig is open: that no hardware is touched is to be the first line."""
    desk.say(*(file.text() for file in fitted.files))
    return fitted


def _fitted(args: argparse.Namespace, definition: Definition) -> Fitted:
    from pulsewright.image.memory import fit
    from pulsewright.image.several import load_files

    first, last = args.range or (0, None)
    image, files = load_files(args.image)
    fitted = fit(
        image,
        definition.words,
        origin=args.origin,
        fill=args.fill,
        first=first,
        last=last,
        blank=definition.blank,
        name=definition.name,
    )
    return replace(fitted, files=files)


def _run(
    args: argparse.Namespace,
    desk: Desk,
    definition: Definition,
    work: Callable[[JobContext], JobResult],
) -> JobResult:
    """Opens rig and session, runs one job, and closes both whatever happens."""
    import sys

    from pulsewright.cli.opening import opened
    from pulsewright.jobs.context import JobContext, Options
    from pulsewright.link.session import Session
    from pulsewright.report.progress import LiveProgress, PlainProgress

    first, last = args.range or (0, None)
    options = Options(
        first=first,
        last=last,
        passes=getattr(args, "passes", 1),
        margins=getattr(args, "margins", False),
        erase=getattr(args, "erase", False),
        save=not getattr(args, "no_save", False),
        vouch=getattr(args, "vouch", ""),
        protect=getattr(args, "protect", "keep"),
        accept_shortfall=getattr(args, "accept_shortfall", False),
        accepted=args.accept_voltages,
    )
    progress = LiveProgress(sys.stderr) if sys.stderr.isatty() else PlainProgress(sys.stderr)
    with ExitStack() as stack:
        rig_file, rig = stack.enter_context(opened(args.rig, definition.name, desk, maker=args.maker or ""))
        stop = stack.enter_context(Stop(desk))
        session = Session(rig.transport, interrupted=stop, on_progress=progress.link)
        stack.callback(session.close)
        session.connect()
        context = JobContext(definition, rig_file, rig, session, options, progress, stop, prompt(desk))
        return work(context)


def _definition(args: argparse.Namespace) -> Definition:
    from pulsewright.chip.load import load

    return load(args.chip, maker=args.maker)


def _answer(desk: Desk, result: JobResult) -> int:
    return desk.answer(result.lines, result.facts)


def _identify(args: argparse.Namespace, desk: Desk) -> int:
    from pulsewright.jobs.identify import identify

    return _answer(desk, _run(args, desk, _definition(args), identify))


def _read(args: argparse.Namespace, desk: Desk) -> int:
    from pulsewright.image.load import RAW, format_for, save
    from pulsewright.jobs.read import read
    from pulsewright.units import show_address

    definition = _definition(args)
    _writable(args.out)
    result = _run(args, desk, definition, read)
    first = args.range[0] if args.range else 0
    save(args.out, result.data, first=first)
    written = f"written to {args.out}"
    if first and format_for(args.out) == RAW:
        at = show_address(first, definition.words)
        written += f": raw bytes, the first one is that of chip address {at}; a .hex file would keep the addresses"
    facts = {**result.facts, "file": args.out, "file_first": first}
    return _answer(desk, replace(result, lines=(*result.lines, written), facts=facts))


def _writable(path: str) -> None:
    """FileMistake before a chip is read for minutes into a file that cannot be written."""
    from pathlib import Path

    folder = Path(path).absolute().parent
    if Path(path).is_dir() or not folder.is_dir() or not os.access(folder, os.W_OK):
        raise FileMistake(
            f"cannot write {path}",
            where=Where(path),
            wanted="a file in a folder that exists and may be written",
            did="nothing was sent to it",
            hint=f"another name, or make the folder {folder} first",
        )


def _blank(args: argparse.Namespace, desk: Desk) -> int:
    from pulsewright.jobs.blank import blank

    return _answer(desk, _run(args, desk, _definition(args), blank))


def _erase(args: argparse.Namespace, desk: Desk) -> int:
    from pulsewright.jobs.erase import check_erasable, erase

    definition = _definition(args)
    check_erasable(definition)
    return _answer(desk, _run(args, desk, definition, erase))


def _protect(args: argparse.Namespace, desk: Desk) -> int:
    from pulsewright.jobs.protect import protect

    return _answer(desk, _run(args, desk, _definition(args), lambda context: protect(context, args.wanted)))


def _burn(args: argparse.Namespace, desk: Desk) -> int:
    from pulsewright.jobs.burn import burn
    from pulsewright.jobs.erase import check_erasable

    definition = _definition(args)
    fitted = _fitted(args, definition)
    if args.erase:
        check_erasable(definition)
    return _answer(desk, _run(args, desk, definition, lambda context: burn(context, _told(desk, fitted))))


def _verify(args: argparse.Namespace, desk: Desk) -> int:
    from pulsewright.jobs.verify import verify

    definition = _definition(args)
    fitted = _fitted(args, definition)
    return _answer(desk, _run(args, desk, definition, lambda context: verify(context, _told(desk, fitted))))
