"""The bundle to send to a colleague: the files of a run in one archive, the same bytes whoever packs it and when."""

from __future__ import annotations

import zipfile
from collections.abc import Iterator
from pathlib import Path

from reduction.checksums import Findings, may_be_shared, read_sums, verify_inputs, verify_results
from reduction.errors import ResultsError
from reduction.resultfiles import CAMPAIGN, MARKING, SUMS
from reduction.wholefile import read_json, whole_file

_TIME = (1980, 1, 1, 0, 0, 0)  # the earliest an archive can hold; no clock gets in
_MODE = 0o100644 << 16  # a file everybody may read


def pack(results: Path, archive: Path, *, campaign: Path | None = None, overwrite: bool = False) -> str:
    """Pack the files of a run, and nothing else that lies in the folder.

    The marking, the state of the runs and the logs never go in, nor claims, register or overrides of a campaign.

    Parameters
    ----------
    results : Path
        A results folder.
    archive : Path
        The archive to write, outside the results.
    campaign : Path, optional
        The campaign the results were made from, to go in as `campaign/`.
    overwrite : bool
        Whether an archive that is there may be replaced.

    Returns
    -------
    str
        What is in it, and what is not, in plain words.

    Raises
    ------
    ResultsError
        If the files are not those of the run or of the campaign it was made from, a link leads outside, or the archive
        is there already.
    """
    names = [*read_sums(results), SUMS]
    _check_archive(results, archive, overwrite)
    found, _ = verify_results(results)
    if MARKING in {name.partition("/")[0] for name in names}:
        message = f"{results / SUMS}: lists files of the marking, which never go into a bundle. Run again."
        raise ResultsError(message)
    _refuse(results, Findings(_outside_marking(found.missing), _outside_marking(found.changed)))
    files = [(name, _target(results, name)) for name in names]
    left = [f"{MARKING}/ (marks and bench reports are personal)"] if (results / MARKING).is_dir() else []
    left += [f"{name} (not of the run)" for name in found.extra if not name.startswith(f"{MARKING}/")]
    if campaign is not None:
        other, _ = verify_inputs(results, campaign)
        _refuse(campaign, Findings(other.missing, other.changed))
        inputs = sorted(read_json(results / "run.json")["inputs"])
        files += [(f"{CAMPAIGN}/{name}", _target(campaign, name)) for name in inputs if may_be_shared(name)]
        left += [f"{CAMPAIGN}/{name} (to be marked)" for name in inputs if not may_be_shared(name)]
    _write(archive, files)
    size = archive.stat().st_size
    lines = [f"{archive}: {len(files)} files, {size / 1e6:.1f} MB. After unpacking: motescale verify FOLDER"]
    return "\n".join(lines + [f"  left out: {name}" for name in left])


def _outside_marking(names: tuple[str, ...]) -> tuple[str, ...]:
    return tuple(name for name in names if not name.startswith(f"{MARKING}/"))


def _check_archive(results: Path, archive: Path, overwrite: bool) -> None:
    if archive.is_dir() or archive.suffix.lower() != ".zip":
        message = f"{archive}: expected the name of an archive that ends in .zip."
        raise ResultsError(message)
    if archive.exists() and not overwrite:
        message = f"{archive}: is there already. Give another name, or say --overwrite."
        raise ResultsError(message)
    if results.resolve() in archive.resolve().parents:
        message = f"{archive}: lies in the results folder, where it would be no file of the run. Put it elsewhere."
        raise ResultsError(message)


def _refuse(folder: Path, found: Findings) -> None:
    if found:
        listed = "\n".join(found.lines())
        message = f"{folder}: these files are not those of the run. Run again before packing.\n{listed}"
        raise ResultsError(message)


def _target(folder: Path, name: str) -> Path:
    """File behind a name, which may be a link within its folder and not out of it."""
    path = (folder / name).resolve()
    if folder.resolve() not in path.parents:
        message = f"{folder / name}: is a link that leads out of the folder, to a file that is not to be packed."
        raise ResultsError(message)
    return path


def _write(archive: Path, files: list[tuple[str, Path]]) -> None:
    with whole_file(archive) as out, zipfile.ZipFile(out, "w") as packed:
        for name, path in sorted(files):
            member = zipfile.ZipInfo(name, _TIME)
            member.create_system = 3  # as on a system with modes, wherever it is packed
            member.external_attr = _MODE
            member.compress_type = zipfile.ZIP_DEFLATED
            with packed.open(member, "w", force_zip64=path.stat().st_size >= 2**31) as into:
                for piece in _pieces(path):
                    into.write(piece)


def _pieces(path: Path) -> Iterator[bytes]:
    with open(path, "rb") as handle:
        while piece := handle.read(1 << 20):
            yield piece
