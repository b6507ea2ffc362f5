"""H10 and H9: what only the operator can say."""

from __future__ import annotations

import dataclasses
from pathlib import Path

import pytest

from pulsewright.chip.load import load, memory_marked
from pulsewright.chip.model import Definition
from pulsewright.errors import ConsentNeeded, UsageMistake, VouchNeeded
from pulsewright.jobs.consent import check_consent, check_vouch, remembered, voltages


@pytest.fixture(autouse=True)
def state(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Path:
    """A state folder of its own."""
    monkeypatch.setenv("PULSEWRIGHT_HOME", str(tmp_path / "state"))
    return tmp_path / "state"


def sourced() -> Definition:
    """The shipped part as if every number had a source."""
    definition = load("27e512")
    return dataclasses.replace(
        definition,
        supplies={k: dataclasses.replace(v, source="", limits_known=True) for k, v in definition.supplies.items()},
        maxima={k: dataclasses.replace(v, source="") for k, v in definition.maxima.items()},
        timing={k: dataclasses.replace(v, source="") for k, v in definition.timing.items()},
    )


def test_voltages_from_memory_are_refused_in_full_with_the_hash() -> None:
    """H10: a shipped part with numbers from memory is refused, each voltage and the hash are shown."""
    definition = load("27e512")
    with pytest.raises(ConsentNeeded) as refused:
        check_consent(definition, in_process=False)
    text = "\n".join(refused.value.lines())
    assert refused.value.exit_code == 3
    assert definition.digest in text
    assert "VPP.erase 14.0 V (13.75 V to 14.25 V) at OE, pin 22, absolute maximum 14.5 V" in text
    assert "VH.erase 14.0 V (13.75 V to 14.25 V) at A9, pin 24, absolute maximum 14.5 V" in text
    assert "VCC.erase_verify 3.75 V" in text
    assert remembered() == set()


def test_every_raised_level_of_the_mode_table_is_shown() -> None:
    """No supply step that a mode names is missing from what the operator is shown."""
    definition = load("27e512")
    shown = "\n".join(voltages(definition))
    assert [name for name in definition.supplies if f"{name} " not in shown] == []


def test_the_hash_is_consent_and_is_remembered() -> None:
    """The digest of the resolved definition agrees, now and the next time without it."""
    definition = load("27e512")
    assert check_consent(definition, in_process=False, accepted=definition.digest) == "given by --accept-voltages"
    assert check_consent(definition, in_process=False) == "remembered"


def test_a_hash_of_another_definition_is_a_mistake() -> None:
    """A hash that is not this definition's is never consent, not even where none is needed."""
    with pytest.raises(UsageMistake):
        check_consent(load("27e512"), in_process=False, accepted="0" * 64)
    with pytest.raises(UsageMistake):
        check_consent(load("27e512"), in_process=True, accepted="0" * 64)


def test_consent_ends_when_the_definition_changes() -> None:
    """A remembered hash does not cover a definition with another digest."""
    definition = load("27e512")
    check_consent(definition, in_process=False, accepted=definition.digest)
    changed = dataclasses.replace(definition, digest="f" * 64)
    with pytest.raises(ConsentNeeded):
        check_consent(changed, in_process=False)


@pytest.mark.parametrize(("answer", "outcome"), [(True, "given at the prompt"), (False, None)])
def test_the_prompt_decides(answer: bool, outcome: str | None) -> None:
    """A yes agrees and is remembered, anything else refuses; the prompt shows the voltages."""
    definition = load("27e512")
    shown: list[list[str]] = []

    def ask(lines: list[str]) -> bool:
        shown.append(lines)
        return answer

    if outcome is None:
        with pytest.raises(ConsentNeeded) as refused:
            check_consent(definition, in_process=False, ask=ask)
        assert remembered() == set()
        assert refused.value.facts == (f"hash {definition.digest}",)  # what was just shown is not shown again
    else:
        assert check_consent(definition, in_process=False, ask=ask) == outcome
        assert remembered() == {definition.digest}
    assert any("14.0 V" in line for line in shown[0])


def test_the_reasons_name_each_mark_once() -> None:
    """A list of twenty values from memory is few lines, and no value is left out of them."""
    definition = load("27e512")
    with pytest.raises(ConsentNeeded) as refused:
        check_consent(definition, in_process=False)
    facts = list(refused.value.facts)
    reasons = facts[facts.index("because:") + 1 : -1]
    assert sum("from memory:" in line for line in reasons) == 1
    names = {word.strip(",") for line in reasons for word in line.split()}
    assert {mark.partition(":")[0] for mark in memory_marked(definition)} <= names


def test_the_virtual_rig_in_this_process_does_not_ask() -> None:
    """There is no chip to harm."""
    assert check_consent(load("27e512"), in_process=True).startswith("not asked")


def test_a_shipped_part_with_sources_needs_no_consent() -> None:
    """Only numbers without a source make a shipped definition ask."""
    assert check_consent(sourced(), in_process=False) == "not needed"


def test_a_definition_from_outside_always_asks(tmp_path: Path) -> None:
    """Sources do not help a definition that is not of the shipped set."""
    outside = dataclasses.replace(sourced(), path=str(tmp_path / "mine.toml"))
    with pytest.raises(ConsentNeeded) as refused:
        check_consent(outside, in_process=False)
    assert any("not one of the shipped" in fact for fact in refused.value.facts)


def test_a_raised_level_without_an_id_needs_the_word() -> None:
    """H9: no ID, a raised level and no --vouch is refused; the word, or nothing raised, passes."""
    nameless = dataclasses.replace(load("27e512"), identify="none")
    with pytest.raises(VouchNeeded):
        check_vouch(nameless, True, "")
    with pytest.raises(VouchNeeded):
        check_vouch(nameless, True, "  ")
    check_vouch(nameless, True, "2716 on a ceramic part")
    check_vouch(nameless, False, "")


def test_a_word_never_covers_an_id() -> None:
    """H9: --vouch over a part that has an ID is a mistake, raised or not."""
    for raises in (True, False):
        with pytest.raises(UsageMistake):
            check_vouch(load("27e512"), raises, "27E512")


def test_a_makers_row_needs_a_consent_of_its_own() -> None:
    """Rows differ in voltages: the file's hash agrees to the look at the ID, the row's to its levels; each once."""
    whole, row = load("27c256"), load("27c256", maker="Atmel")
    assert whole.digest != row.digest
    with pytest.raises(UsageMistake, match="another definition"):
        check_consent(whole, in_process=False, accepted=row.digest)  # nobody agreed to the look yet
    assert check_consent(whole, in_process=False, accepted=whole.digest) == "given by --accept-voltages"
    with pytest.raises(ConsentNeeded) as refused:
        check_consent(row, in_process=False)
    assert row.digest in refused.value.hint
    assert "VPP.program 13.0 V" in "\n".join(refused.value.facts)
    assert check_consent(whole, in_process=False, accepted=row.digest) == "remembered"  # meant for the row
    assert check_consent(row, in_process=False, accepted=row.digest) == "given by --accept-voltages"
    assert check_consent(row, in_process=False) == "remembered"
