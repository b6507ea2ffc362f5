"""A sheet of plain numbers as a definition file, as a careful user would copy it; the other writer is sheet_chip."""

from __future__ import annotations

from collections.abc import Iterable, Mapping

from tests.sequence.sheet import Sheet, Times

_PULSED = {
    "address setup": "tAS", "address hold": "tAH", "data setup": "tDS", "data hold": "tDH", "raised setup": "tVS",
    "raised hold": "tVH", "supply setup": "tVCS", "control setup": "tCS", "control hold": "tOEH", "recovery": "tVR",
    "release to outputs": "tOES", "access": "tACC", "verify access": "tOV", "float": "tDF", "outputs on": "tOE",
    "pulse": "tPW", "erase pulse": "tEW",
}  # fmt: skip
_BUS = {
    "address setup": "tAS", "address hold": "tAH", "data setup": "tDS", "data hold": "tDH", "output setup": "tOES",
    "output hold": "tOEH", "enable setup": "tCS", "enable hold": "tCH", "write high": "tWPH", "write": "tWP",
    "between looks": "tOEHP", "access": "tACC", "float": "tDF", "outputs on": "tOE", "load gap": "tBLC", "cycle": "tWC",
    "after a cycle": "tDW", "after a command": "tWPH2", "erase": "tSCE", "ID": "tIDA",
}  # fmt: skip


def definition_of(sheet: Sheet) -> str:
    """The whole file."""
    on_the_bus = sheet.page or sheet.family == "bytes"
    parts = [_chip(sheet), _pins(sheet), _supplies(sheet), _maxima(sheet), _modes(sheet)]
    parts.append(_timing(sheet, _BUS if on_the_bus else _PULSED))
    parts.append(_identify(sheet))
    parts.append(_bus(sheet) if on_the_bus else _pulses(sheet))
    return "\n".join(parts)


def _table(name: str, rows: Mapping[str, str]) -> str:
    return "\n".join([f"[{name}]", *(f"{key} = {value}" for key, value in rows.items() if value), ""])


def _quoted(text: object) -> str:
    return f'"{text}"'


def _chip(sheet: Sheet) -> str:
    kind = "electrical" if sheet.erase_tries or sheet.family == "bytes" else "none" if sheet.page else "uv"
    rows = {
        "name": _quoted("invented"), "about": _quoted(sheet.family), "words": str(sheet.words), "width": "8",
        "package": _quoted(f"DIP-{sheet.package}"), "source": _quoted("invented"), "erase": _quoted(kind),
    }  # fmt: skip
    if sheet.family == "bytes":
        rows["technology"] = _quoted("flash")
    text = "format = 1\n" + _table("chip", rows)
    return text + ("\n" + _table("geometry", {"page": str(sheet.page)}) if sheet.page else "")


def _pins(sheet: Sheet) -> str:
    named = {"CE": sheet.ce, "OE": sheet.oe, "VPP": sheet.vpp, "VCC": sheet.package, "GND": sheet.package // 2}
    named["PGM" if sheet.vpp else "WE"] = sheet.other
    rows = {"A": str(list(sheet.address)), "D": str(list(sheet.data))}
    rows |= {name: str(pin) for name, pin in named.items() if pin}
    rows["NC"] = str(list(sheet.unconnected)) if sheet.unconnected else ""
    return _table("pins", rows)


def _supplies(sheet: Sheet) -> str:
    names = {
        "VCC read": "VCC.read", "VCC program": "VCC.program", "VCC erase verify": "VCC.erase_verify",
        "VPP program": "VPP.program", "VPP erase": "VPP.erase", "A9 identify": "VH.identify", "A9 erase": "VH.erase",
    }  # fmt: skip
    rows = {}
    for name, (least, usual, most) in sheet.levels.items():
        current = sheet.currents.get("VCC program" if name == "VCC program" else name[:3])
        more = f', current = "{current} uA"' if current else ""
        settle, _, _ = sheet.times.get("power-up", (0, 0, 0))
        more += f', settle = "{settle} ns"' if settle else ""
        rows[names[name]] = f'{{ typ = "{usual} mV", min = "{least} mV", max = "{most} mV"{more} }}'
    return _table("supplies", rows)


def _maxima(sheet: Sheet) -> str:
    raised = "VPP" if sheet.vpp else "OE"
    names = {"VCC": "VCC", "VPP": raised, "A9": "A9", "other": "other"}
    return _table("maxima", {names[name]: _quoted(f"{mv} mV") for name, mv in sheet.most.items()})


def _mode(**levels: str) -> str:
    return "{ " + ", ".join(f'{name} = "{level}"' for name, level in levels.items()) + " }"


def _modes(sheet: Sheet) -> str:
    read, high = {"VCC": "VCC.read"}, {"VCC": "VCC.program"}
    if sheet.page or sheet.family == "bytes":
        rows = {
            "read": _mode(CE="L", OE="L", WE="H", **read, D="out"),
            "standby": _mode(CE="H", OE="H", WE="H", **read, D="Z"),
            "write": _mode(CE="L", OE="H", WE="H", **read, D="in"),
        }
        return _table("modes", rows)
    if not sheet.vpp:
        rows = {
            "read": _mode(CE="L", OE="L", **read, D="out"),
            "standby": _mode(CE="H", OE="H", **read, D="Z"),
            "program": _mode(CE="H", OE="VPP.program", **high, D="in"),
            "verify": _mode(CE="L", OE="L", **high, D="out") [:-2] + ', access = "tOV" }',
        }  # fmt: skip
        if sheet.ids:
            rows["identify"] = _mode(CE="L", OE="L", A9="VH.identify", **read, D="out")
        if sheet.erase_tries:
            rows["erase"] = '{ CE = "H", OE = "VPP.erase", A9 = "VH.erase", A = "L", VCC = "VCC.program", D = 0xFF }'
            rows["erase_verify"] = _mode(CE="L", OE="L", VCC="VCC.erase_verify", D="out")[:-2] + ', access = "tOV" }'
        return _table("modes", rows)
    rest, up = {"VPP": "VCC", **read}, {"VPP": "VPP.program", **high}
    pgm = {"PGM": "H"} if sheet.other else {}
    up_pulse = sheet.family == "own VPP, CE high"
    idle = "L" if up_pulse or sheet.other else "H"  # CE in program
    still = "L" if up_pulse else "H"  # CE in inhibit
    look = "L" if up_pulse or sheet.other else "H"  # CE in verify
    rows = {
        "read": _mode(CE="L", OE="L", **pgm, **rest, D="out"),
        "standby": _mode(CE="H", OE="H", **pgm, **rest, D="Z"),
        "program": _mode(CE=idle, OE="H", **pgm, **up, D="in"),
        "verify": _mode(CE=look, OE="L", **pgm, **up, D="out")[:-2] + ', access = "tOV" }',
        "inhibit": _mode(CE=still, OE="H", **pgm, **up, D="Z"),
    }
    if sheet.ids:
        rows["identify"] = _mode(CE="L", OE="L", **pgm, A9="VH.identify", **rest, D="out")
    return _table("modes", rows)


def _window(time: Times) -> str:
    named = zip(("min", "typ", "max"), time, strict=True)
    return "{ " + ", ".join(f'{name} = "{ns} ns"' for name, ns in named if ns) + " }"


def _timing(sheet: Sheet, names: Mapping[str, str]) -> str:
    rows = {names[name]: _window(time) for name, time in sheet.times.items() if any(time) and name in names}
    rows["tCE"] = rows["tACC"]
    return _table("timing", rows)


def _identify(sheet: Sheet) -> str:
    if sheet.ids is None:
        return _table("identify", {"kind": _quoted("none")})
    rows = {"mode": _quoted("identify")}
    if sheet.family == "bytes":
        rows = {
            "command": _quoted("id_enter"), "leave": _quoted("id_leave"), "mode": _quoted("read"),
            "settle": _quoted("tIDA"),
        }  # fmt: skip
    cells = ", ".join(f'{{ at = {at}, is = {word}, what = "ID {at}" }}' for at, word in enumerate(sheet.ids))
    return _table("identify", rows) + f'\n[[makers]]\nmaker = "invented"\nid = [{cells}]\n'


# ---- algorithms -----------------------------------------------------------------------------------------------------


def _steps(lines: Iterable[str]) -> str:
    return "[\n    " + ",\n    ".join(lines) + ",\n]"


def _wait(sheet: Sheet, *names: str) -> list[str]:
    """Waits for those of these times that the sheet gives."""
    return [f'{{ wait = "{_PULSED[name]}" }}' for name in names if any(sheet.times.get(name, (0, 0, 0)))]


def _pulse(sheet: Sheet, between: str) -> list[str]:
    """A pulse on the word in hand, from its mode to the mode between pulses and looks."""
    up = sheet.family == "own VPP, CE high"
    pin = "PGM" if sheet.vpp and sheet.other else "CE"
    before = ["address setup", "data setup", "control setup"]
    after = ["address hold", "data hold", "control hold"]
    if not sheet.vpp:
        before.append("raised setup")
        after.append("raised hold")
    return [
        '{ mode = "program", D = "image" }',
        *_wait(sheet, *before),
        f'{{ pulse = "{pin}", to = "{"H" if up else "L"}", time = "tPW" }}',
        *_wait(sheet, *after),
        f'{{ mode = "{between}" }}',
        *_wait(sheet, *(["release to outputs"] if sheet.vpp else ["recovery", "release to outputs"])),
    ]


def _looked(between: str) -> list[str]:
    return ['{ mode = "verify" }', '{ expect = "image" }', f'{{ mode = "{between}" }}']


def _repeat(steps: Iterable[str], count: int, until: str = "") -> str:
    return "{ repeat = [" + ", ".join(steps) + f"], max = {count}{until} }}"


def _each(steps: Iterable[str], unit: str = "word") -> str:
    return f'{{ each = "{unit}", steps = [' + ", ".join(steps) + "] }"


def _pulses(sheet: Sheet) -> str:
    between = "inhibit" if sheet.vpp else "standby"
    pulse, look = _pulse(sheet, between), _looked(between)
    if sheet.family == "own VPP, CE high":
        steps = [_each([*pulse, *look])]
    elif sheet.family == "own VPP, blind pass":
        again = _repeat(['{ mode = "inhibit" }', *pulse, *look[:2]], sheet.tries)
        steps = [
            _each(pulse[: -len(_wait(sheet, "release to outputs")) or None]),
            *_wait(sheet, "release to outputs"),
            _each(['{ mode = "verify" }', f'{{ expect = "image", else = [{again}] }}', '{ mode = "inhibit" }']),
        ]
    else:
        steps = [_each([_repeat([*pulse, *look], sheet.tries)])]
    if sheet.vpp:
        waits = _wait(sheet, "raised setup", "supply setup")
        steps = ['{ mode = "inhibit" }', *waits, *steps, '{ mode = "standby" }']
    text = _table("program", {"bits": _quoted("1 to 0"), "unit": _quoted("word"), "steps": _steps(steps)})
    if not sheet.erase_tries:
        return text
    erase = [
        '{ mode = "erase" }',
        *_wait(sheet, "address setup", "data setup", "raised setup", "supply setup"),
        '{ pulse = "CE", to = "L", time = "tEW" }',
        *_wait(sheet, "address hold", "data hold", "raised hold"),
        '{ mode = "standby" }',
        *_wait(sheet, "recovery"),
    ]
    until = ', until = { every = "word", mode = "erase_verify", is = 0xFF }'
    rows = {"bits": _quoted("to blank"), "unit": _quoted("chip")}
    rows["steps"] = _steps([_repeat(erase, sheet.erase_tries, until)])
    return text + "\n" + _table("erase", rows)


def _cycles(cycles: Iterable[tuple[int, int]]) -> list[str]:
    return [_quoted(f"{word:02X}@{at:04X}") for at, word in cycles]


def _command(sheet: Sheet, name: str) -> str:
    return f"[{', '.join(_cycles(sheet.commands[name]))}]"


def _bus(sheet: Sheet) -> str:
    names = {"on": "protect_on", "off": "protect_off", "enter": "id_enter", "leave": "id_leave", "erase": "chip_erase"}
    if not sheet.protects and sheet.page:
        names = {}
    rows = {there: _command(sheet, here) for here, there in names.items() if here in sheet.commands}
    text = _table("commands", rows) + "\n" if rows else ""
    busy = "tWC" if sheet.page else "tSCE"
    write = {"mode": _quoted("write"), "pin": _quoted("WE"), "to": _quoted("L"), "time": _quoted("tWP")}
    write |= {"gap": _quoted("tBLC") if sheet.page else "", "busy": _quoted(busy)}
    text += _table("write", write)
    return text + (_by_page(sheet) if sheet.page else _by_byte(sheet))


def _after(sheet: Sheet) -> list[str]:
    return ['{ wait = "tDW" }'] if any(sheet.times["after a cycle"]) else []


def _by_page(sheet: Sheet) -> str:
    work = [
        '{ load = "page" }', '{ poll = "DQ7", mode = "read", within = "tWC" }', *_after(sheet), '{ mode = "read" }',
        _each(['{ expect = "image" }']), '{ mode = "standby" }',
    ]  # fmt: skip
    rows = {"bits": _quoted("both"), "unit": _quoted("page"), "unloaded": _quoted("kept")}
    text = "\n" + _table("program", {**rows, "steps": _steps([_each(work, "page")])})
    if not sheet.protects:
        return text
    end = ['{ write = "protect_on" }', '{ mode = "standby" }', '{ wait = "tWC" }']
    guarded = ['{ write = "protect_on" }', *work]
    text += "\n" + _table("program.protected", {"steps": _steps([_each(guarded, "page")]), "finally": _steps(end)})
    off = ['{ write = "protect_off" }', *end[1:]]
    return text + "\n" + _table("protect", {"on": _steps(end), "off": _steps(off)})


def _by_byte(sheet: Sheet) -> str:
    cycles = ", ".join([*_cycles(sheet.commands["program"]), '"image"'])
    work = [
        f"{{ write = [{cycles}] }}", '{ poll = "DQ7", mode = "read", within = "tWC" }', *_after(sheet),
        '{ mode = "read" }', '{ expect = "image" }', '{ mode = "standby" }',
    ]  # fmt: skip
    rows = {"bits": _quoted("1 to 0"), "unit": _quoted("word"), "steps": _steps([_each(work)])}
    erase = ['{ write = "chip_erase" }', '{ poll = "DQ6", mode = "read", within = "tSCE" }', *_after(sheet)]
    until = ', until = { every = "word", mode = "read", is = 0xFF }'
    blank = {"bits": _quoted("to blank"), "unit": _quoted("chip"), "steps": _steps([_repeat(erase, 1, until)])}
    return "\n" + _table("program", rows) + "\n" + _table("erase", blank)
