"""Files that mean harm, or might: structures, names, links, devices, texts that some other program would run."""

from __future__ import annotations

import os
import random
import re
import shutil
import socket
from pathlib import Path

from oddtexts import EXTREMES, FEW, FORMULAS, HEADS, IDS, INSTEAD, TAGS
from sample import LOGS, SESSION, Dialect, Sample, csv_name, rendered


def bomb(chance: random.Random, sample: Sample, folder: Path) -> str:
    """Write YAML that grows, nests or repeats."""
    name = chance.choice(sorted(name for name in sample.files if name.endswith(".yaml")))
    size = chance.choice([20, 1000, 30_000])
    ways = {
        "laughs": "a: &a [x, x]\n" + "".join(f"{chr(98 + k)}: &{chr(98 + k)} [*{chr(97 + k)}, *{chr(97 + k)}]\n"
                                            for k in range(20)),
        "deep list": "title: " + "[" * size,
        "deep closed list": "title: " + "[" * size + "]" * size,
        "deep mapping": "title: " + "{a: " * size,
        "deep block": "".join("  " * k + "a:\n" for k in range(min(size, 600))),
        "deep dashes": "- " * size,
        "deep keys": "? " * size,
        "long text": "title: " + "x" * 900_000,
        "long key": "k" * min(size, 900) + ": 1",
        "long strange key": "? " + "k" * size + "\n: 1",
        "spaced key": "? a" + " " * size + "b\n: 1",
        "many keys": "".join(f"k{k}:\n" for k in range(size)),
        "one key often": "title: a\n" * size,
        "many sessions": "sessions: [" + ",".join(f"t{k}" for k in range(size)) + "]",
        "many equal sessions": "sessions: [" + "s001," * size + "]",
        "many left out": "leave_out: {" + ",".join(f"t{k}: a" for k in range(size)) + "}",
        "self": "a: &a\n  b: *a",
        "merge": "<<: {trap: basket-a}\n",
        "merge alias": "x: &x {trap: a}\n<<: *x\n",
        "documents": "---\na: 1\n" * 20,
        "directive": "%YAML 9.9\n%TAG ! tag:x,2000:\n---\n",
        "folded": "title: >\n" + "  word\n" * size,
        "comment": "#" * 900_000 + "\n",
        "tabs": "title:\t\tx\n\ttrap: y\n",
        "many documents": "--- a\n" * size,
        "many anchors": "".join(f"k{k}: &a{k} 1\n" for k in range(size)),
        "digits": "seed: " + "1" * size + "x",
        "accents": "title: a" + "\u0315\u0300" * size,
        "escapes": 'title: "\\0\\e[2J\\x1b\\u202e\\ud800"',
        "escape bell": 'operator: "a\\ab\\rc"',
        "quantity digits": "shape_factor: " + "1" * size + "x",
        "quantity power": "shape_factor: 1(1)e" + "9" * 5000,
        "empty key": ": 1\n? \n",
        "null key": "~: 1\nnull: 2\n",
        "list top": "- a\n- b\n",
        "text top": "just a text\n",
    }  # fmt: skip
    way = chance.choice(sorted(ways))
    old = (folder / name).read_text("utf-8") if chance.random() < 0.5 else ""
    (folder / name).write_bytes((old + ways[way] + "\n").encode())
    return f"{way} {size} in {name}"


def tag(chance: random.Random, sample: Sample, folder: Path) -> str:
    """Give one value a tag, or a structure that belongs elsewhere."""
    name = chance.choice(sorted(name for name in sample.files if name.endswith(".yaml")))
    lines = (folder / name).read_text("utf-8").splitlines()
    at = chance.choice([k for k, line in enumerate(lines) if ":" in line])
    new = chance.choice(
        [*TAGS, "[]", "{}", "[1, 2]", "{a: 1}", "|\n  x", "*a", "&a 5", "null", "", "yes", "{value: {value: 5}}"]
    )
    lines[at] = lines[at].partition(":")[0] + ": " + new
    (folder / name).write_bytes(("\n".join(lines) + "\n").encode())
    return f"{name} line {at + 1}: {new}"


def extreme(chance: random.Random, sample: Sample, folder: Path) -> str:
    """Write numbers that are allowed and absurd."""
    told = []
    for _ in range(chance.choice([1, 1, 2, 4])):
        name = chance.choice(sorted(name for name in sample.files if name.endswith(".yaml")))
        text = (folder / name).read_text("utf-8")
        found = [piece for piece in re.finditer(r"-?\d[\d.]*(\(\d+\))?(e\d)?(?=[,}\n])", text)]
        if not found:
            continue
        piece = chance.choice(found)
        new = chance.choice(EXTREMES)
        text = text[: piece.start()] + new + text[piece.end() :]
        (folder / name).write_bytes(text.encode())
        told.append(f"{name}: {piece[0]} -> {new}")
    return "; ".join(told)


def readings(chance: random.Random, sample: Sample, folder: Path) -> str:
    """Leave few, equal, contradictory or absurd readings."""
    log = chance.choice(LOGS)
    heads, rows = sample.table(log)
    way = chance.choice(FEW)
    at = chance.randrange(1, len(heads))
    if way in ("one", "two", "none"):
        rows = rows[: {"one": 1, "two": 2, "none": 0}[way]]
    elif way == "equal":
        rows = [[*row[:2], *rows[0][2:]] for row in rows]
    elif way == "columns":
        rows = [[*row[:at], rows[0][at], *row[at + 1 :]] if at > 1 else row for row in rows]
    elif way == "particles":
        rows = [[f"q{k}", *row[1:]] for k, row in enumerate(rows)]
    elif way == "times":
        rows = [[row[0], repr(chance.uniform(-1e300, 1e300)), *row[2:]] for row in rows]
    elif way == "twice":
        rows = rows + rows
    else:
        change = {"scaled": 1000.0, "tiny": 1e-30, "huge": 1e6, "zero": 0.0, "sign": -1.0, "noise": 1.0}[way]
        rows = [[*row[:at], repr(float(row[at]) * change * (chance.lognormvariate(0, 3) if way == "noise" else 1.0)),
                 *row[at + 1 :]] for row in rows]  # fmt: skip
    (folder / csv_name(log)).write_bytes(rendered(heads, rows, Dialect()).encode())
    if chance.random() < 0.4:
        for other in LOGS:
            if other != log:
                (folder / csv_name(other)).unlink()
    return f"{log} {way} {heads[at]}"


def rows(chance: random.Random, sample: Sample, folder: Path) -> str:
    """Shift, repeat, cut and stretch rows, cells and heads."""
    log = chance.choice([*LOGS, "particles", "lost"])
    heads, body = sample.table(log)
    table = [heads, *map(list, body)]
    told = []
    for _ in range(chance.choice([1, 1, 3])):
        row = chance.choice(table)
        at = chance.randrange(len(row)) if row else 0
        way = chance.randrange(10)
        told.append(str(way))
        if way == 0 and row:
            del row[at]
        elif way == 1 and row:
            row.insert(at, row[at])
        elif way == 2:
            row.append(chance.choice(["", "x", "1"]))
        elif way == 3:
            table.insert(chance.randrange(len(table) + 1), list(row))
        elif way == 4 and len(table) > 1:
            table.remove(row)
        elif way == 5 and row:
            row[at] = chance.choice([*FORMULAS, *IDS])
        elif way == 6 and table[0]:
            table[0][chance.randrange(len(table[0]))] = chance.choice(HEADS)
        elif way == 7:
            chance.shuffle(row)
        elif way == 8 and row:
            row[at] = row[at] * chance.choice([2, 40_000])
        elif way == 9:
            row.extend("x" for _ in range(chance.choice([2, 3000])))
    text = rendered(table[0], table[1:], Dialect(chance.choice(",;\t"))) if table else ""
    (folder / csv_name(log)).write_bytes(text.encode())
    return f"{log} {' '.join(told)}"


def texts(chance: random.Random, sample: Sample, folder: Path) -> str:
    """Put texts that another program would run wherever texts may stand."""
    formula = chance.choice(FORMULAS)
    quoted = "'" + formula.replace("'", "''").replace("\n", "\n\n    ") + "'"
    session = folder / SESSION
    lines = [
        line for line in session.read_text("utf-8").splitlines() if not line.startswith(("operator", "notes", "attr"))
    ]
    lines += [f"operator: {quoted}", f"notes: {quoted}", f"attributes: {{bench: {quoted}}}"]
    if chance.random() < 0.5:
        lines = [line for line in lines if not line.startswith("charged_with")] + [f"charged_with: {quoted}"]
    session.write_bytes(("\n".join(lines) + "\n").encode())
    campaign = folder / "campaign.yaml"
    campaign.write_bytes((campaign.read_text("utf-8").replace("title:", "# ") + f"title: {quoted}\n").encode())
    log = chance.choice(LOGS)
    heads, body = sample.table(log)
    heads = [*heads, "exclude", "note"]
    body = [[*row, formula if k == 0 else "", formula] for k, row in enumerate(body)]
    (folder / csv_name(log)).write_bytes(rendered(heads, body, Dialect(quotes=True)).encode())
    particles = [["p01", formula, "1"]]
    (folder / csv_name("particles")).write_bytes(rendered(*_with(sample, "particles", particles), Dialect()).encode())
    lost = [["p09", formula]]
    (folder / csv_name("lost")).write_bytes(rendered(*_with(sample, "lost", lost), Dialect()).encode())
    return f"{formula[:40]!r} in {log}"


def _with(sample: Sample, log: str, body: list[list[str]]) -> tuple[list[str], list[list[str]]]:
    return sample.table(log)[0], body


def names(chance: random.Random, sample: Sample, folder: Path) -> str:
    """Give sessions, traps, species and particles names that lead elsewhere."""
    name = chance.choice(IDS)
    where = chance.choice(
        ["session folder", "trap file", "key", "particle", "sessions", "leave_out", "instrument", "word"]
    )
    try:
        if where == "session folder":
            os.rename(folder / "sessions/s001", os.fsencode(folder / "sessions") + b"/" + _bytes(chance, name))
        elif where == "trap file":
            path = folder / sample.named("traps/")
            os.rename(
                path, os.fsencode(path.parent) + b"/" + _bytes(chance, name) + chance.choice([b".yaml", b".yml", b""])
            )
    except (OSError, ValueError):
        where = "key"
    quoted = '"' + name.replace("\\", "\\\\").replace('"', '\\"').replace("\n", "\\n").replace("\x00", "\\0") + '"'
    lines = {
        "key": f"{chance.choice(['trap', 'species'])}: {quoted}",
        "instrument": f"instruments: {{height: {quoted}}}",
        "word": f"attributes: {{{quoted}: x}}",
    }
    if where in lines:
        path = folder / SESSION
        start = lines[where].partition(":")[0]
        kept = [line for line in path.read_text("utf-8").splitlines() if not line.startswith(start + ":")]
        path.write_bytes(("\n".join([*kept, lines[where]]) + "\n").encode())
    if where == "particle":
        log = chance.choice([*LOGS, "particles", "lost"])
        heads, body = sample.table(log)
        body = [[name, *row[1:]] for row in body]
        (folder / csv_name(log)).write_bytes(rendered(heads, body, Dialect()).encode())
    if where in ("sessions", "leave_out"):
        line = f"sessions: [{quoted}]" if where == "sessions" else f"leave_out: {{{quoted}: x}}"
        with (folder / "campaign.yaml").open("a", encoding="utf-8") as file:
            file.write(line + "\n")
    return f"{name[:30]!r} as {where}"


def _bytes(chance: random.Random, name: str) -> bytes:
    return chance.choice([name.encode(), name.encode(), b"\xff\xfe", b"s\x1b[2J", b"s\n2", b"s 2", b"s'2", b's"2'])


def files(chance: random.Random, sample: Sample, folder: Path) -> str:
    """Put something else in the place of a file or folder; `outside` lies beside the campaign."""
    outside = folder.parent / "outside"
    name = chance.choice(
        [*sorted(sample.files), *LOGS, "sessions", "sessions/s001", "traps", "species", "sessions/s002", "more"]
    )
    path = folder / (csv_name(name) if name in LOGS else name)
    way = chance.choice(INSTEAD)
    inner = ["campaign.yaml", "sessions", ".", csv_name("lost")]
    if path.is_dir():
        shutil.rmtree(path)
    elif path.exists():
        path.unlink()
    make = {
        "empty": lambda: path.write_bytes(b""),
        "folder": lambda: path.mkdir(),
        "link out": lambda: path.symlink_to(outside / chance.choice([".", path.name, "canary.csv"])),
        "link round": lambda: path.symlink_to(path.name),
        "link in": lambda: path.symlink_to(os.path.relpath(folder / chance.choice(inner), path.parent)),
        "link nowhere": lambda: path.symlink_to("nowhere"),
        "link to staff": lambda: path.symlink_to(folder / "marking" / "register.csv"),
        "pipe": lambda: os.mkfifo(path),
        "device": lambda: path.symlink_to("/dev/null"),
        "endless device": lambda: path.symlink_to("/dev/zero"),
        "socket": lambda: _socket(path),
        "mark alone": lambda: path.write_bytes(b"\xef\xbb\xbf"),
        "binary": lambda: path.write_bytes(chance.randbytes(3000)),
        "zip": lambda: path.write_bytes(b"PK\x03\x04" + bytes(100)),
        "hidden": lambda: path.with_name("." + path.name).write_bytes(b"x"),
        "closed": lambda: (path.write_bytes(b"x"), path.chmod(0)),
    }  # fmt: skip
    if way in make:
        make[way]()
    return f"{way} for {name}"


def _socket(path: Path) -> None:
    at = os.getcwd()
    os.chdir(path.parent)  # the name of a socket may be short only
    try:
        with socket.socket(socket.AF_UNIX) as one:
            one.bind(path.name)
    finally:
        os.chdir(at)


def options(chance: random.Random, sample: Sample, folder: Path) -> str:
    """Combine options of the campaign."""
    words = {
        "adjust": ["session", "campaign", "particle"],
        "drag": ["unsteady", "steady"],
        "mass_from": ["adjusted", "drag", "diameter"],
        "lot": ["prior", "unused"],
        "scatter": ["stated", "inflate"],
        "when_a_session_fails": ["stop", "leave_out"],
        "coverage_probability": ["0.95", "1e-9", "0.999999999999", "0.5"],
        "seed": ["0", "9223372036854775807", "-1", "01"],
        "compare": ["{quantity: charge, by: bench}", "{by: trap}", "{by: nothing}", "{quantity: mass}"],
    }
    lines = [f"{word}: {chance.choice(values)}" for word, values in words.items() if chance.random() < 0.5]
    path = folder / "campaign.yaml"
    text = "".join(line for line in path.read_text("utf-8").splitlines(keepends=True) if not line.startswith("drag"))
    path.write_bytes((text + "\n".join(lines) + "\n").encode())
    also = chance.choice([readings, extreme, texts, rows])
    return "; ".join(lines) + "; " + also(chance, sample, folder)


ALL = (bomb, tag, extreme, readings, rows, texts, names, files, options)
WEIGHTS = (7, 4, 8, 6, 6, 4, 4, 6, 6)
