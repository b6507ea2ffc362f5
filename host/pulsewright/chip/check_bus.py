"""Checks of [geometry], [commands] and [write], and of the steps that write on the bus: write, load, poll."""

from __future__ import annotations

from collections.abc import Iterable

from pulsewright.chip.check_levels import control_pattern, enabled_by
from pulsewright.chip.findings import Findings
from pulsewright.chip.lines import KeyPath
from pulsewright.chip.model import BusWrite, Cycle, LoadStep, Mode, PollStep, WriteStep
from pulsewright.errors import Where
from pulsewright.units import show_ps

_OTHER = {"L": "H", "H": "L"}


def check(found: Findings) -> None:
    """All checks of the tables; the steps are checked where they are walked."""
    _page(found)
    for cycles in found.defn.commands.values():
        check_cycles(found, cycles)
    if found.defn.write is not None:
        _write(found, found.defn.write)


def _page(found: Findings) -> None:
    page, words = found.defn.page, found.defn.words
    if page and page & (page - 1):
        found.at(("geometry", "page"), "a page that is no power of two", found=str(page), wanted="such as 64 or 128")
    elif page and words and words % page:
        what = "a page that does not divide the words"
        found.at(("geometry", "page"), what, found=f"{page} of {words}", wanted="whole pages only")


# ---- commands ----


def check_cycles(found: Findings, cycles: Iterable[Cycle]) -> None:
    """Each cycle's address is one the part has, and its word is no wider than the part's."""
    words, width = found.defn.words, found.defn.width
    for cycle in cycles:
        if cycle.at is not None and words and cycle.at >= words:
            what = "a cycle beyond the address lines of the part"
            found.at(cycle.where, what, found=f"0x{cycle.at:X}", wanted=f"below 0x{words:X}")
        if cycle.word is not None and cycle.word >= 1 << width:
            found.at(cycle.where, "a cycle wider than a word", found=f"0x{cycle.word:X}", wanted=f"{width} bits")


def check_command(found: Findings, place: KeyPath | Where, name: object) -> None:
    """A command's name stands in [commands]."""
    if isinstance(name, str) and name not in found.tree.names("commands"):
        found.unknown(place, "command", name, found.tree.names("commands"))


# ---- [write] ----


def _write(found: Findings, write: BusWrite) -> None:
    mode = found.defn.modes.get(write.mode)
    if not found.has_mode(write.mode):
        found.unknown(("write", "mode"), "mode", write.mode, found.tree.names("modes"))
    elif mode is not None and mode.data != "in":
        what = "a write mode that does not take the word"
        found.at(("write", "mode"), what, found=f"{mode.name} has D {mode.data!r}", wanted='D = "in"')
    if write.pin not in found.control_roles():
        found.unknown(("write", "pin"), "control pin", write.pin, found.control_roles())
    elif mode is not None:
        _strobe(found, write, mode)
    _limit(found, ("write", "time"), write.timing, "min", "a strobe without a minimum")
    _limit(found, ("write", "gap"), write.gap, "max", "a load gap without a maximum")
    _limit(found, ("write", "busy"), write.busy, "max", "a part that may be busy for ever")


def _strobe(found: Findings, write: BusWrite, mode: Mode) -> None:
    """The strobe is at its idle level in the mode, and low or high it never enables the outputs."""
    level = mode.levels.get(write.pin)
    if level != _OTHER[write.to]:
        if write.pin in found.tree.names("modes", mode.name):
            what = "a write strobe that is not at its idle level"
            found.at(("write", "pin"), what, found=f"{write.pin} is {level} in {mode.name}", wanted=_OTHER[write.to])
        return
    out = enabled_by(found, {**control_pattern(found, mode), write.pin: write.to})
    if out:
        what = "a write strobe that enables the outputs"
        found.at(
            ("write", "pin"), what, found=f"{mode.name} with {write.pin} {write.to} is as {out}", wanted="outputs off"
        )


def _limit(found: Findings, place: KeyPath | Where, name: str, limit: str, what: str) -> None:
    """A timing parameter that exists and has the limit."""
    if not name:
        return
    if name not in found.tree.names("timing"):
        found.unknown(place, "timing parameter", name, found.tree.names("timing"))
    elif limit not in found.tree.names("timing", name):
        found.at(place, what, found=f"{name} without {limit}", wanted=f"{limit} of {name}")


# ---- steps ----


def _can_write(found: Findings, where: Where) -> None:
    if "write" not in found.tree.names():
        found.at(where, "a bus write of a part that does not say how", wanted="[write] mode, pin, to, time")


def check_write(found: Findings, step: WriteStep, *, in_word: bool) -> None:
    """A list of cycles: known, inside the part, the image's word last and in hand."""
    _can_write(found, step.where)
    if step.command:
        check_command(found, step.where, step.command)
        return
    check_cycles(found, step.cycles)
    for cycle in step.cycles[:-1]:
        if cycle.word is None:
            found.at(cycle.where, "the image's word before the end of a list", found='"image"', wanted="it comes last")
    if any(cycle.word is None for cycle in step.cycles) and not in_word:
        found.at(step.where, "the image's word outside `each`", found='"image"', wanted='inside { each = "word", ... }')


def check_load(found: Findings, step: LoadStep, *, in_page: bool) -> None:
    """A page is loaded in a loop over pages, and not word by word."""
    _can_write(found, step.where)
    if not in_page:
        found.at(step.where, "a load outside a loop over pages", wanted='in { each = "page", ... }, not in each word')
    if found.defn.write is not None and "gap" not in found.tree.names("write"):
        found.at(step.where, "a load, and nothing says how long the part waits for the next word", wanted="[write] gap")


def check_poll(found: Findings, step: PollStep, mode: str, *, in_hand: bool) -> None:
    """A poll reads, moves no supply, ends, and compares with a word that is known."""
    if step.timing in found.tree.names("timing"):
        _limit(found, step.where, step.timing, "max", "a poll without a maximum")
    elif step.timing.strip()[:1].isdigit():
        wanted = "the name of a timing parameter with a max"
        found.at(step.where, "a poll without a maximum", found=f'"{step.timing}"', wanted=wanted)
    else:
        found.unknown(step.where, "timing parameter", step.timing, found.tree.names("timing"))
    _longest(found, step)
    if step.bit == "DQ7" and not in_hand:
        what = "a poll for a word that was not written"
        found.at(step.where, what, found=step.bit, wanted="DQ6, or a loop over words or pages")
    if not found.has_mode(step.mode):
        found.unknown(step.where, "mode", step.mode, found.tree.names("modes"))
        return
    row, now = found.defn.modes.get(step.mode), found.defn.modes.get(mode)
    if row is not None and row.data != "out":
        what = "a poll in a mode that does not read"
        found.at(step.where, what, found=f"{step.mode} has D {row.data!r}", wanted='D = "out"')
    raised = ", ".join(found.raised_pins(step.mode))
    if raised or (row is not None and now is not None and row.vcc != now.vcc):
        levels = raised or f"{row.vcc if row else ''} after {now.vcc if now else ''}"
        found.at(step.where, "a poll that moves a supply", found=f"{step.mode}: {levels}", wanted="VCC as it stands")


def _longest(found: Findings, step: PollStep) -> None:
    """A job that is broken off waits for `busy` before VCC goes: no work of the part may outlast it (H5)."""
    write, within = found.defn.write, found.defn.timing.get(step.timing)
    if write is None or within is None or within.max_ps is None:
        return
    if "busy" not in found.tree.names("write"):
        wanted = f'[write] busy = "{step.timing}", or a longer one'
        found.at(step.where, "a poll, and nothing says how long the part is busy", found=step.timing, wanted=wanted)
        return
    busy = found.defn.timing.get(write.busy)
    if busy is not None and busy.max_ps is not None and within.max_ps > busy.max_ps:
        longer = f"{step.timing} up to {show_ps(within.max_ps)}"
        wanted = f"at most {show_ps(busy.max_ps)} ({write.busy}), or a longer [write] busy"
        found.at(step.where, "a poll that outlasts what the part is said to be busy", found=longer, wanted=wanted)
