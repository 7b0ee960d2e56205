"""Five hundred mutations of a small campaign; `python tests/fuzzing/trial.py 10000` runs more."""

from __future__ import annotations

from collections import Counter
from pathlib import Path

import pytest
import sample as samples
from trial import Failure, Plain, plain, prepare_heads, run

COUNT, PARTS = 500, 10


@pytest.fixture(scope="module")
def base(tmp_path_factory: pytest.TempPathFactory) -> Plain:
    top = tmp_path_factory.mktemp("sample")
    sample = samples.made(top / "made")
    prepare_heads(sample)
    return plain(sample, top / "plain")


@pytest.mark.fuzz
@pytest.mark.parametrize("part", range(PARTS))
def test_no_mutation_brings_about_what_must_never_happen(base: Plain, tmp_path: Path, part: int) -> None:
    failures, came = [], Counter[str]()
    for seed in range(part, COUNT, PARTS):
        try:
            came[run(seed, base, tmp_path / str(seed))] += 1
        except Failure as failure:
            failures.append(str(failure))
    assert not failures, "\n\n".join(failures)
    # Mutations that are all refused, or all harmless, would test little.
    assert came["reduced"] >= COUNT / PARTS / 5
    assert came["refused"] >= COUNT / PARTS / 5
