"""One mutated campaign checked, reduced and written in a folder that is watched; what must never happen fails."""

from __future__ import annotations

import hashlib
import json
import math
import os
import random
import signal
import stat
import sys
import warnings
from collections import Counter
from collections.abc import Iterator
from contextlib import contextmanager
from dataclasses import dataclass, replace
from decimal import Decimal
from pathlib import Path
from types import FrameType
from typing import Any

import pandas as pd
from mutations import NUMBERS, QUANTITIES, Expected, mutate
from sample import LOGS, Sample

from reduction.assembly import gather
from reduction.check import check_campaign, check_marking, report_text
from reduction.errors import ReductionError
from reduction.logs import Logs
from reduction.markedbench import marks_of
from reduction.records import SessionRecord, load
from reduction.session import reduce_campaign, reduce_session
from reduction.settings import Campaign
from reduction.tables import COLUMNS

PATIENCE = 90.0  # for one mutation, which takes well below a second where nothing else runs [s]
FOLDERS = ("campaign", "my lab data (2)", "Gerät 'A' \"Süd\"", "a\nb", "-rf", "=1+1", "$(touch canary);`touch canary`",
           "100%{x}", "x" * 200, ".hidden", "\U0001f600")  # fmt: skip
_FORMULA = ("=", "+", "-", "@", "\t", "\r")


class Failure(AssertionError):
    """A mutation brought about what must never happen."""


class _Hang(BaseException):
    """The alarm; no handler of errors may take it for one."""


@contextmanager
def alarm(seconds: float) -> Iterator[None]:
    """Break off what takes longer."""

    def ring(number: int, frame: FrameType | None) -> None:
        raise _Hang

    before = signal.signal(signal.SIGALRM, ring)
    signal.setitimer(signal.ITIMER_REAL, seconds)
    try:
        yield
    finally:
        signal.setitimer(signal.ITIMER_REAL, 0.0)
        signal.signal(signal.SIGALRM, before)


@dataclass(frozen=True)
class Plain:
    """What the sample itself gives."""

    sample: Sample
    campaign: Campaign
    logs: Logs
    record: SessionRecord


def plain(sample: Sample, folder: Path) -> Plain:
    """Check and reduce the sample."""
    sample.write(folder)
    campaign, logs, faults = check_campaign(folder)
    assert not len(faults), report_text(campaign, logs, faults)
    return Plain(sample, campaign, logs["s001"], reduce_session(campaign, "s001", logs["s001"]))


def run(seed: int, base: Plain, place: Path) -> str:
    """Run the mutation of one seed in a new folder; returns what came of it: refused, reduced, or not to be reduced."""
    chance = random.Random(f"place {seed}")
    folder, results = place / chance.choice(FOLDERS), place / f"results {chance.choice(FOLDERS)}"
    (place / "outside").mkdir(parents=True)
    (place / "outside" / "canary.csv").write_bytes(b"secret-of-another\n")
    (place / "here").mkdir()
    results.mkdir()
    expected = mutate(seed, base.sample, folder)
    label = f"seed {seed}, {expected.about}"
    before = _tree(place, results)
    at = os.getcwd()
    os.chdir(place / "here")
    try:
        with warnings.catch_warnings(), alarm(PATIENCE):
            warnings.simplefilter("ignore")  # of numpy, which a log may hold
            came = _judged(base, expected, folder, results)
    except _Hang:
        raise Failure(f"{label}: took longer than {PATIENCE} s") from None
    except Failure as failure:
        raise Failure(f"{label}: {failure}") from None
    except Exception as error:
        raise Failure(f"{label}: {type(error).__name__}: {error}") from error
    finally:
        os.chdir(at)
    if _tree(place, results) != before:
        raise Failure(f"{label}: a file outside the results folder was made or changed")
    if any(name.startswith("canary") and not name.endswith(".csv") for _, _, names in os.walk(place) for name in names):
        raise Failure(f"{label}: code was run")
    return came


def _tree(place: Path, without: Path) -> dict[str, object]:
    found: dict[str, object] = {}
    for top, folders, names in os.walk(os.fsencode(place)):
        folders[:] = [name for name in folders if os.path.join(top, name) != os.fsencode(without)]
        for name in folders + names:
            path = os.path.join(top, name)
            state = os.lstat(path)
            content: object = state.st_size
            if stat.S_ISREG(state.st_mode):
                with open(path, "rb") as file:
                    content = hashlib.sha256(file.read()).hexdigest()
            found[repr(path)] = (state.st_mode, content) if not stat.S_ISDIR(state.st_mode) else state.st_mode
    return found


def _judged(base: Plain, expected: Expected, folder: Path, results: Path) -> str:
    campaign, logs, faults = check_campaign(folder)
    marking = check_marking(campaign, logs, faults)
    text = report_text(campaign, logs, faults, marking)
    unmarked = [fault for listed in marking.faulty.values() for fault in listed] if marking else []
    _check_words(
        text, [*unmarked, *faults, *(fault for listed in campaign.faulty.values() for fault in listed)], folder
    )
    if len(faults):
        if expected.kind == "same":
            raise Failure(f"refused though it means the same: {text}")
        return "refused"
    _check_numbers(base, expected, campaign, logs)
    _check_traced(folder, logs)
    try:
        records = _reduced(campaign, logs)
    except ReductionError as error:
        if expected.kind == "same":
            raise Failure(f"not to be reduced though it means the same: {error}") from None
        if not str(error):
            raise Failure("an error without words") from None
        return "not to be reduced"
    _check_written(records, results)
    if marking:
        for name in sorted(records):
            marks_of(campaign, name, marking, records[name], lambda name=name: logs[name])  # type: ignore[misc]
    if expected.kind == "same":
        _check_same_results(base.record, records["s001"])
    return "reduced"


def _check_words(text: str, faults: list[Any], folder: Path) -> None:
    """Every fault says where, what was found and what was expected, and can be printed anywhere."""
    for fault in faults:
        if not (fault.path and fault.found and fault.expected):
            raise Failure(f"a fault that says too little: {fault!r}")
        if os.path.isabs(fault.path) or (len(folder.name) > 8 and folder.name in str(fault)):
            raise Failure(f"a fault that tells the folder: {fault!r}")
    if "secret-of-another" in text:
        raise Failure("content of a file outside the campaign was told")
    odd = [one for one in text if not one.isprintable() and one != "\n"]
    if odd:
        raise Failure(f"text that no terminal should get: {odd[:3]}")
    if len(text) > 200_000:
        raise Failure(f"{len(text)} characters of words")


def _ordered(table: pd.DataFrame) -> pd.DataFrame:
    keys = [name for name in ("particle", "time") if name in table]
    return table.drop(columns="line").sort_values(keys, ignore_index=True)


def _close(one: float, other: Decimal | float) -> bool:
    return math.isclose(one, float(other), rel_tol=1e-15) or one == float(other)


def _check_numbers(base: Plain, expected: Expected, campaign: Campaign, logs: dict[str, Logs]) -> None:
    """The checked table holds what was written, and all that was not touched as it was."""
    if expected.kind == "anything":
        return
    if expected.kind in ("cell", "key") and expected.value is None and not expected.blank:
        raise Failure("taken for a number")
    own = logs["s001"]
    if set(own.tables) != set(base.logs.tables):
        raise Failure(f"logs {sorted(own.tables)}")
    for log, table in base.logs.tables.items():
        found = own.tables[log]
        if expected.kind == "same":
            one, other = _ordered(found), _ordered(table)
            pd.testing.assert_frame_equal(one[other.columns], other, check_exact=False, rtol=4e-16, atol=0.0)
            continue
        table = table.copy()
        if expected.kind == "cell" and expected.place[0] == log:
            _, name, row = expected.place
            value = math.nan if expected.value is None else float(expected.value[0])
            if not math.isnan(value) and not _close(found[name].iloc[int(row)], value):
                raise Failure(f"read as {found[name].iloc[int(row)]!r}, written was {value!r}")
            table.loc[int(row), name] = value
        pd.testing.assert_frame_equal(
            found.drop(columns="line"), table.drop(columns="line"), check_exact=False, rtol=4e-16, atol=0
        )
    if expected.kind == "same":
        same = replace(campaign, folder=base.campaign.folder) == base.campaign
        if not same:
            raise Failure("other settings")
    if expected.kind == "key" and expected.value is not None:
        _, where, name, _, _ = QUANTITIES[expected.place[0]]
        (found,) = (getattr(one, name) for one in where(campaign).values())
        if not (
            _close(found.estimate, expected.value[0]) and math.isclose(found.u, float(expected.value[1]), rel_tol=1e-14)
        ):
            raise Failure(f"read as {found}, written was {expected.value}")


def _check_traced(folder: Path, logs: dict[str, Logs]) -> None:
    """Every number of a checked table stands in its line of the file; sound heads and encodings alone can be traced."""
    units = {field: above / below for field, above, below in NUMBERS.values()}
    for session, own in logs.items():
        for log, table in own.tables.items():
            raw = (folder / "sessions" / session / f"{log}.csv").read_bytes()
            if raw[:2] in (b"\xff\xfe", b"\xfe\xff") or log not in LOGS:
                continue
            text = raw.decode("utf-8-sig", errors="replace").replace("\r\n", "\n").replace("\r", "\n")
            lines = text.replace("\N{MINUS SIGN}", "-").split("\n")
            if not any(line.replace(" ", "").replace('"', "") in _HEADS for line in lines):
                continue
            if '"' in text:
                continue
            for _, row in table.iterrows():
                there = set(_numbers_in(lines[int(row["line"]) - 1]))
                for field, factor in units.items():
                    value = row.get(field, math.nan)
                    if not math.isnan(value) and not any(_close(value, one * factor) for one in there):
                        raise Failure(f"{log} line {row['line']}: {field} {value!r} stands nowhere in it")


_HEADS: set[str] = set()


def _numbers_in(line: str) -> Iterator[float]:
    for cells in (line.split(","), line.replace(",", ".").split(";"), line.replace(",", ".").split("\t")):
        for cell in cells:
            try:
                yield float(cell.strip(' "'))
            except ValueError:
                continue


def _reduced(campaign: Campaign, logs: dict[str, Logs]) -> dict[str, SessionRecord]:
    options = replace(campaign.options, monte_carlo_trials=100)
    campaign = replace(campaign, options=options)
    if options.adjust == "campaign":
        return reduce_campaign(campaign, logs)
    return {name: reduce_session(campaign, name, logs[name]) for name in campaign.session_ids}


def _check_written(records: dict[str, SessionRecord], results: Path) -> None:
    """Tables read back as they were, hold no formula, and no number that is none."""
    folders = []
    for name, record in sorted(records.items()):
        folders.append(results / "records" / name / "x")
        folders[-1].parent.mkdir(parents=True)
        record.save(folders[-1])
        _check_back(record, load(folders[-1]))
    gather(folders, results)
    for path in sorted(results.rglob("*.csv")):
        for line in path.read_bytes().decode().split("\n"):
            for cell in line.split(","):
                bare = cell.removeprefix('"')
                if bare.startswith(_FORMULA) and not _is_number(bare):
                    raise Failure(f"{path.name} holds the formula {cell[:60]}")


def _is_number(text: str) -> bool:
    try:
        return math.isfinite(float(text))
    except ValueError:
        return False


def _check_back(record: SessionRecord, back: SessionRecord) -> None:
    if json.loads(json.dumps(record.facts, allow_nan=False)) != back.facts:
        raise Failure("session.json reads back otherwise")
    for name, table in record.tables.items():
        if tuple(back.tables[name].columns) != COLUMNS[name]:
            raise Failure(f"columns of {name}")
        for column in COLUMNS[name]:
            for was, now in zip(table[column].tolist(), back.tables[name][column].tolist(), strict=True):
                missing = was is None or was is pd.NA or (isinstance(was, float) and math.isnan(was))
                if missing and (now == "" or now != now):
                    continue
                if isinstance(now, float) and not isinstance(was, str) and float(was) == now:
                    continue
                if was != now:
                    raise Failure(f"{name}, {column}: {was!r} reads back as {now!r}")


def _check_same_results(base: SessionRecord, found: SessionRecord) -> None:
    """The same readings give the same result; their order may move the last digits alone."""
    for name in ("charge_to_mass_C_per_kg", "mass_kg", "charge_C"):
        one, other = (record.tables["particles"] for record in (base, found))
        if list(one["particle"]) != list(other["particle"]) or list(one["status"]) != list(other["status"]):
            raise Failure("other particles")
        for a, b, u in zip(one[name], other[name], one[f"u_{name}"], strict=True):
            if abs(a - b) > 1e-3 * u:
                raise Failure(f"{name} {a!r} becomes {b!r}, u {u!r}")


def prepare_heads(sample: Sample) -> None:
    """Note the heads whose numbers can be traced."""
    for log in LOGS:
        heads, _ = sample.table(log)
        for separator in ",;\t":
            _HEADS.add(separator.join(heads))


def main() -> int:
    """Run many mutations: `python tests/fuzzing/trial.py COUNT [FIRST]`; prints each failure and a count at the end."""
    import shutil
    import tempfile

    import sample as samples

    count, first = int(sys.argv[1]), int(sys.argv[2]) if len(sys.argv) > 2 else 0
    failures, came = [], Counter[str]()
    with tempfile.TemporaryDirectory() as name:
        top = Path(name)
        one = samples.made(top / "made")
        base = plain(one, top / "plain")
        prepare_heads(one)
        for seed in range(first, first + count):
            place = top / f"{seed}"
            try:
                came[run(seed, base, place)] += 1
            except Failure as failure:
                failures.append(str(failure))
                sys.stdout.write(f"{failure}\n")
                if "-v" in sys.argv and failure.__cause__:
                    import traceback

                    traceback.print_exception(failure.__cause__, file=sys.stdout)
                sys.stdout.flush()
            shutil.rmtree(place, ignore_errors=True)
    sys.stdout.write(f"{count} mutations from {first}: {dict(sorted(came.items()))}, {len(failures)} failures\n")
    return 1 if failures else 0


if __name__ == "__main__":
    sys.exit(main())
