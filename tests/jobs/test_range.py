"""A burn of a range and an erase of the whole chip: nothing outside the range is lost for it."""

from __future__ import annotations

from pathlib import Path

import pytest

from pulsewright.errors import Difference
from pulsewright.image.memory import fit, image_of
from pulsewright.jobs.burn import burn
from tests.jobs.fake import WORDS, FakeSession, context, noise


@pytest.fixture(autouse=True)
def state(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """A state folder of its own."""
    monkeypatch.setenv("PULSEWRIGHT_HOME", str(tmp_path / "state"))


def test_an_erase_never_clears_what_lies_outside_the_range() -> None:
    """With words outside the range that are not blank, the burn is refused with their count, and nothing is written."""
    session = FakeSession(noise())
    before = bytes(session.cells)
    fitted = fit(image_of(b"\xff" * 256), WORDS, first=0, last=255)
    with pytest.raises(Difference) as refused:
        burn(context(session, erase=True, first=0, last=255), fitted)

    outside = sum(word != 0xFF for word in before[256:])
    assert f"{outside} words outside 0000..00FF" in refused.value.what
    assert refused.value.exit_code == 1
    assert bytes(session.cells) == before
    assert set(session.kinds) == {"read"}


def test_an_erase_is_made_where_the_rest_is_blank() -> None:
    """A chip that is blank outside the range is erased for it, and burnt."""
    session = FakeSession()
    session.cells[:256] = noise()[:256]
    fitted = fit(image_of(bytes(range(256))), WORDS, first=0, last=255)
    burn(context(session, erase=True, first=0, last=255), fitted)

    assert bytes(session.cells[:256]) == bytes(range(256))
