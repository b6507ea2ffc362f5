"""Faults planted in the jobs for the two rules that are theirs, H9 and H10: what the refusal holds back gets through.

So the refusals that the other tests see are made by these very lines, and a job that lost them would be caught.
"""

from __future__ import annotations

import dataclasses
from pathlib import Path

import pytest

from pulsewright.chip.load import load
from pulsewright.chip.model import Definition
from pulsewright.errors import ConsentNeeded, PulsewrightError, VouchNeeded
from pulsewright.image.memory import Fitted, fit, image_of
from pulsewright.jobs import context as context_module
from pulsewright.jobs.burn import burn
from tests.jobs.fake import WORDS, FakeSession, context


@pytest.fixture(autouse=True)
def state(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """A state folder of its own."""
    monkeypatch.setenv("PULSEWRIGHT_HOME", str(tmp_path / "state"))


def image() -> Fitted:
    """Four bytes that a blank chip takes."""
    return fit(image_of(b"\x12\x34\x56\x78"), WORDS, name="27e512")


def without_id() -> Definition:
    """The shipped part as if it had no ID to read."""
    return dataclasses.replace(load("27e512"), identify="none", identify_mode="", makers=(), row=None)


def sent(definition: Definition | None, *, in_process: bool) -> tuple[list[str], PulsewrightError | None]:
    """The sequences that a burn sent, and how it was refused."""
    session = FakeSession()
    try:
        burn(context(session, definition=definition, in_process=in_process), image())
    except PulsewrightError as error:
        return session.kinds, error
    return session.kinds, None


def test_only_the_consent_holds_a_burn_back_from_a_port(monkeypatch: pytest.MonkeyPatch) -> None:
    """H10: without consent nothing at all is sent to a port; with its check planted away, the burn goes out."""
    kinds, refusal = sent(None, in_process=False)
    assert (kinds, type(refusal)) == ([], ConsentNeeded)
    monkeypatch.setattr(context_module, "check_consent", lambda *args, **kwargs: "planted")
    kinds, refusal = sent(None, in_process=False)

    assert "burn" in kinds
    assert refusal is None


def test_only_the_operators_word_holds_a_part_without_id_back(monkeypatch: pytest.MonkeyPatch) -> None:
    """H9: without the word no raising sequence is sent; with its check planted away, it goes out as `vouched none`."""
    kinds, refusal = sent(without_id(), in_process=True)
    assert "burn" not in kinds
    assert isinstance(refusal, VouchNeeded)
    monkeypatch.setattr(context_module, "check_vouch", lambda *args: None)
    kinds, refusal = sent(without_id(), in_process=True)

    assert "burn" in kinds
    assert refusal is None
