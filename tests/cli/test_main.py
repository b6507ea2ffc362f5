"""The command line as such: help, one form of error, JSON, start-up, bugs, closed pipes."""

from __future__ import annotations

import json
import os
import re
import subprocess
import sys
from collections.abc import Iterator
from pathlib import Path

import pytest

from pulsewright.cli import chips
from pulsewright.cli.desk import Parser
from pulsewright.cli.main import main, make_parser


def leaves(parser: Parser, words: tuple[str, ...] = ()) -> Iterator[tuple[tuple[str, ...], Parser]]:
    """Every command that does something, with its words."""
    inner = [action for action in parser._actions if hasattr(action, "choices") and isinstance(action.choices, dict)]
    if not inner:
        yield words, parser
    for action in inner:
        assert isinstance(action.choices, dict)
        for name, child in action.choices.items():
            yield from leaves(child, (*words, name))


COMMANDS = list(leaves(make_parser()))


def test_all_commands_of_this_stage_are_there() -> None:
    """The commands that the README's task table names."""
    assert {" ".join(words) for words, _ in COMMANDS} == {
        "chips", "chip", "identify", "read", "blank-check", "erase", "burn", "verify", "protect", "define check",
        "sequence", "rig show", "bench new", "bench show", "bench serve", "record list", "record show",
    }  # fmt: skip


@pytest.mark.parametrize("words", [words for words, _ in COMMANDS], ids=" ".join)
def test_each_command_helps_by_itself(words: tuple[str, ...], capsys: pytest.CaptureFixture[str]) -> None:
    """--help ends with 0 and shows an example that begins with the command itself."""
    assert main([*words, "--help"]) == 0
    shown = capsys.readouterr().out
    assert f"example:\n  pulsewright {' '.join(words)}" in shown


@pytest.mark.parametrize("group", ["define", "rig", "bench", "record"])
def test_each_group_helps_by_itself(group: str, capsys: pytest.CaptureFixture[str]) -> None:
    """A word that only holds commands lists them and shows an example too."""
    assert main([group, "--help"]) == 0
    assert f"example:\n  pulsewright {group} " in capsys.readouterr().out


@pytest.mark.parametrize("parser", [parser for _, parser in COMMANDS], ids=[" ".join(words) for words, _ in COMMANDS])
def test_every_example_can_be_parsed(parser: Parser) -> None:
    """The example in the help is a command line that the parser takes."""
    example = re.search(r"example:\n  pulsewright (.*)", parser.format_help())
    assert example is not None
    make_parser().parse_args(example[1].split())


def test_there_is_no_one_letter_option_but_o() -> None:
    """-o is the file to write; everything else is spelled out."""
    parsers = [make_parser(), *(parser for _, parser in COMMANDS)]
    options = {option for parser in parsers for option in parser._option_string_actions}
    assert {option for option in options if re.fullmatch(r"-[^-]", option)} == {"-o"}


@pytest.mark.parametrize("command", ["read", "erase", "burn", "verify", "identify", "blank-check"])
def test_jobs_warn_in_their_help(command: str, capsys: pytest.CaptureFixture[str]) -> None:
    """Each job warns of high voltage and static; of UV-C and licensed practice where they come in."""
    main([command, "--help"])
    shown = capsys.readouterr().out
    assert "High voltage and hot parts" in shown
    assert "Static:" in shown
    assert ("UV-C" in shown) == (command in ("erase", "burn"))
    assert ("licensed practice" in shown) == (command in ("burn", "verify"))


@pytest.mark.parametrize(
    ("words", "says"),
    [
        ([], "COMMAND"),
        (["brun", "27e512"], "burn, or pulsewright --help"),
        (["read", "27e512", "--rig", "virtual"], "-o"),
        (["identify", "27e512", "--range", "0x10"], "FIRST..LAST"),
        (["identify", "27e512", "--range", "x..y"], "an address"),
        (["burn", "27e512", "a.hex", "--fill", "0x100"], "not a byte"),
        (["read", "27e512", "-o", "x", "--passes", "0"], "1 to 1000"),
        (["identify", "27e512", "--ri", "virtual"], "--ri"),
        (["burn", "27e512", "a.hex", "--rig", "virtual", "--erasee"], "try: --erase, or pulsewright burn --help"),
        (["burn", "27e512", "--rig", "virtual"], "IMAGE is missing"),
        (["burn", "27e512", "a.hex", "--fill", "FF"], "'FF' is not a byte such as 0xFF"),
        (["identify", "27e512", "--rig", "virtul"], "try: --rig virtual\n"),
        (["identify", "27e512", "--rig", "Virtual:a.bench"], "try: --rig virtual:a.bench"),
        (["identify", "27e512", "--rig", "virtual:missing.bench"], "bench new missing.bench --chip"),
        (["bench", "new", "a.bench", "--chip", "27e512", "--contents", "missing.bin"], "or an image file"),
        (["bench", "new", "a.bench", "--chip", "27c512"], "--model FILE"),
        (["chip", "27e513"], "27e512"),
        (["chip", "27e512", "--maker", "nobody"], "nobody"),
        (["define", "check", "missing.toml"], "try: start with a copy"),
        (["sequence", "27e512", "read", "--range", "0..64K"], "does not lie in"),
        (["identify", "27e512"], "--rig"),
        (["record", "show", "nothing"], "no record"),
        (["bench", "show", "missing.bench"], "there is no bench missing.bench"),
    ],
)
def test_wrong_usage_is_two_and_says_what_is_wanted(
    words: list[str], says: str, capsys: pytest.CaptureFixture[str]
) -> None:
    """Exit 2, the facts on standard error, nothing on standard output, and one thing to try."""
    assert main(words) == 2
    shown = capsys.readouterr()
    assert shown.out == ""
    assert says in shown.err
    assert "Traceback" not in shown.err


def test_an_error_is_one_json_object_with_result_and_exit(capsys: pytest.CaptureFixture[str]) -> None:
    """--json gives the error on standard output too, its class and facts as keys."""
    assert main(["chip", "27e513", "--json"]) == 2
    shown = capsys.readouterr()
    answer = json.loads(shown.out)
    assert (answer["exit"], answer["error"]) == (2, "DefinitionMistake")
    assert answer["result"] in shown.err


def test_an_unknown_option_is_json_too(capsys: pytest.CaptureFixture[str]) -> None:
    """Even what the parser refuses answers in JSON when that was asked for."""
    assert main(["chips", "--json", "--nothing"]) == 2
    assert json.loads(capsys.readouterr().out)["error"] == "UsageMistake"


@pytest.mark.parametrize("words", [["chips"], ["chip", "27e512"], ["rig", "show"], ["sequence", "27e512", "read"]])
def test_facts_come_as_one_json_object(words: list[str], capsys: pytest.CaptureFixture[str]) -> None:
    """Each fact-giving command has `result` and `exit`."""
    assert main([*words, "--json"]) == 0
    answer = json.loads(capsys.readouterr().out)
    assert answer["exit"] == 0
    assert answer["result"]


def test_define_check_tells_the_hash_of_a_good_definition(capsys: pytest.CaptureFixture[str]) -> None:
    """A shipped definition has nothing to put right."""
    from pulsewright.chip.load import find, load

    assert main(["define", "check", str(find("27e512"))]) == 0
    assert load("27e512").digest in capsys.readouterr().out


def test_define_check_lists_every_mistake(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    """Two mistakes in one run, each with its line."""
    from pulsewright.chip.load import find

    text = find("27e512").read_text("utf-8").replace("CE  = 20", "CE  = 28")
    path = tmp_path / "mine.toml"
    path.write_text(re.sub(r"(?m)^tPW .*", 'tPW = { typ = "100 us" }', text), "utf-8")
    assert main(["define", "check", str(path)]) == 2
    shown = capsys.readouterr().err
    lines = path.read_text("utf-8").splitlines()
    vcc = next(number for number, line in enumerate(lines, 1) if line.startswith("VCC = 28"))
    pulse = next(number for number, line in enumerate(lines, 1) if 'time = "tPW"' in line)
    assert f"mine.toml:{vcc} pins.VCC: a pin used twice" in shown
    assert re.search(rf"mine.toml:{pulse} .*: a pulse with no window", shown)


def test_a_bug_is_one_line_that_says_so(capsys: pytest.CaptureFixture[str], monkeypatch: pytest.MonkeyPatch) -> None:
    """An exception nobody expected is exit 5, owned up to, with the way to its traceback; no traceback unasked."""

    def broken(*_: object) -> int:
        raise KeyError("surprise")

    monkeypatch.setattr(chips, "_chips", broken)
    assert main(["chips"]) == 5
    shown = capsys.readouterr().err
    assert "a bug of the program" in shown
    assert "PULSEWRIGHT_TRACEBACK=1" in shown
    assert "Traceback" not in shown
    monkeypatch.setenv("PULSEWRIGHT_TRACEBACK", "1")
    assert main(["chips"]) == 5
    assert "Traceback" in capsys.readouterr().err


def test_ctrl_c_outside_a_job_is_130(capsys: pytest.CaptureFixture[str], monkeypatch: pytest.MonkeyPatch) -> None:
    """Nothing ran, and it says so."""

    def stopped(*_: object) -> int:
        raise KeyboardInterrupt

    monkeypatch.setattr(chips, "_chips", stopped)
    assert main(["chips"]) == 130
    assert "no sequence was running" in capsys.readouterr().err


def run(*words: str, pipe: str = "", **env: str) -> subprocess.CompletedProcess[str]:
    """The program in a process of its own."""
    code = "import sys; from pulsewright.cli.main import main; sys.exit(main())"
    command = [sys.executable, "-c", code, *words]
    if pipe:
        shell = " ".join(f"'{word}'" for word in command) + f" | {pipe}"
        command = ["bash", "-c", f"set -o pipefail; {shell}"]
    return subprocess.run(command, capture_output=True, text=True, check=False, env={**os.environ, **env})


def test_a_reader_that_goes_away_is_no_error() -> None:
    """`| head` closes the pipe: no message, and no exit code of a crash."""
    done = run("sequence", "27e512", "burn", pipe="true")
    assert done.stderr == ""
    assert done.returncode in (0, 3)


def test_help_imports_nothing_costly() -> None:
    """--help brings in no job, no definition, no library that only some commands need."""
    code = (
        "import sys; from pulsewright.cli.main import main; main(['burn', '--help']); "
        "print(*sorted(name for name in sys.modules if name.split('.')[0] in "
        "('rich', 'serial', 'intelhex', 'crcmod', 'cobs', 'tomllib', 'platformdirs') or "
        "name.startswith(('pulsewright.jobs', 'pulsewright.chip', 'pulsewright.link', 'pulsewright.virtual'))), "
        "file=sys.stderr)"
    )
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=False)
    assert (done.returncode, done.stderr.strip()) == (0, "")
