"""The whole job of the line's tests, cheaper: blocks of a few words, and pure functions computed once."""

from __future__ import annotations

import functools
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from typing import Any

import pytest

from pulsewright.chip.load import load
from pulsewright.jobs import burn as burn_module
from pulsewright.jobs.plan import BLOCK_WORDS, change, write_blocks
from pulsewright.sequence.compile import compile_burn, compile_read
from pulsewright.sequence.proof import prove
from tests.link.whole_job import undisturbed


def _remembered(work: Callable[..., Any]) -> Callable[..., Any]:
    """Pure functions of a job give the same answer each time: the job is run thousands of times here."""
    known: dict[Any, Any] = {}

    @functools.wraps(work)
    def remembering(*args: Any, **named: Any) -> Any:
        key = tuple(id(one) if type(one).__hash__ is None or not _plain(one) else one for one in args)
        key += tuple(sorted((name, repr(value)) for name, value in named.items()))
        if key not in known:
            known[key] = (args, work(*args, **named))  # what is known by its id is kept, so that no other takes it
        return known[key][1]

    return remembering


def _plain(value: Any) -> bool:
    return isinstance(value, bytes | str | int)


@contextmanager
def small_blocks() -> Iterator[None]:
    """Blocks of a few words, and pure functions computed once."""
    with pytest.MonkeyPatch.context() as patch:
        jobs = "pulsewright.jobs"
        patch.setattr(f"{jobs}.read.BLOCK_WORDS", BLOCK_WORDS)  # `Table.run` sets its own; undone in the end
        patch.setattr(f"{jobs}.writing.write_blocks", write_blocks)
        patch.setattr(f"{jobs}.context._kept", lambda *told: "kept")  # records are no matter of the line
        patch.setattr(f"{jobs}.maker.load", _remembered(load))
        patch.setattr(f"{jobs}.context.prove", _by_value(prove))
        patch.setattr(f"{jobs}.read.compile_read", _remembered(compile_read))
        patch.setattr(f"{jobs}.writing.compile_burn", _remembered(compile_burn))
        patch.setattr(f"{jobs}.burn.change", functools.lru_cache(8)(change))
        patch.setattr(f"{jobs}.burn._target", _remembered(burn_module._target))
        undisturbed.cache_clear()
        yield
    undisturbed.cache_clear()


def _by_value(proof: Callable[..., Any]) -> Callable[..., Any]:
    known: dict[Any, Any] = {}

    @functools.wraps(proof)
    def remembering(code: bytes, permit: Any, definition: Any, rig: Any) -> Any:
        key = (code, permit, id(definition), id(rig))
        if key not in known:
            known[key] = proof(code, permit, definition, rig)
        return known[key]

    return remembering
