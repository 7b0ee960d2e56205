"""Texts, names and words that mutations draw from."""

from __future__ import annotations

PIECES = (
    b",", b";", b"\t", b"\n", b"\r", b"\r\n", b'"', b"'", b'""', b":", b": ", b"[", b"]", b"{", b"}", b"#", b"&a ",
    b"*a", b"!", b"!!float ", b"|", b">", b"%", b"@", b"`", b"---\n", b"...\n", b"- ", b"? ", b"<<: ", b"\x00",
    b"\x1b[2J", b"\x85", b"\xa0", b"\xff", b"\xfe", b"\xef\xbb\xbf", b"\xc2", b"\xe2\x80\xa8", b"\xe2\x80\xae",
    b"\xed\xa0\x80", b"\xf4\x90\x80\x80", b"1,234", b"nan", b"1e999", b"-", b".", b"e", b"(", b")", b"sep=;\n",
    b"\xcd\xbe",
)  # fmt: skip
"""Bytes that some format takes for more than text."""
RUN = "__import__('os').system('touch canary')"
FORMULAS = (
    "=1+1", "=cmd|' /C touch canary'!A1", "+1+1", "-1+1", "@SUM(1)", "\t=1+1", "=HYPERLINK(\"http://a\",\"b\")", "-5",
    "-1.5e-3", "+3", "'=1+1", " =1+1", "\uff1d1+1", "=", "-", "--1", "=1\n=2", "$(touch canary)", "`touch canary`",
    "; touch canary", "{{7*7}}", "${7*7}", "%(x)s", "{0.__class__}", "#set page(width: 1pt)",
    "#read(\"/etc/passwd\")", "$x$", "*bold* _it_", "<script>alert(1)</script>", "\\input{/etc/passwd}", "../../x",
    "a\u202eb", "\u200d", "x" * 5000, "\U0001f600", RUN,
)  # fmt: skip
"""Texts that some program runs, and numbers that look like such."""
TAGS = (
    "!!python/object/apply:os.system ['touch canary']", "!!python/name:os.system", "!!python/object/new:type {}",
    f"!!python/object/apply:eval [\"{RUN}\"]", "!!binary dG91Y2g=", "!!timestamp 2020-01-01", "!!set {a, b}", "!x 5",
    "!!float 5", "!!int '5'", "!<tag:yaml.org,2002:python/name:os.system> x", "!!omap [a: 1]", "!!str 5", "! 5",
)  # fmt: skip
"""YAML that asks for objects."""
IDS = (
    "..", ".", "../x", "a/b", "/etc/passwd", "a\x00b", "x" * 65, "x" * 250, "p 1", "-p", "_p", "p.csv", "p\n1", "p:1",
    "p*", "CON", "é", "p\u0301", "\u202ep", "=p", "'p'", '"p"', "p;1", "p,1", "", " ", "no", "~", "0x1", "1e3", "p'1",
    "$HOME", "\uff50", "p\u200b", "x" * 64,
)  # fmt: skip
"""Names that lead elsewhere, or nearly are ids."""
EXTREMES = (
    "0", "1", "-1", "1e-30", "1e30", "1e300", "1e-300", "0(1)", "1(1)e200", "1e-300(1)", "1.0(1)e-200",
    "{value: 1, u: 1e300}", "{value: 1, u: 1e-300}", "{value: 20, u: 20, dof: 1e-3}", "1.0(5000)",
    "{value: 1, u: 0.5, dof: 1}", "1e5", "1e-5", "273", "-273.15", "100", "0.5", "2e3",
)  # fmt: skip
"""Numbers that are allowed somewhere and absurd."""
HEADS = (
    "", "height", "height_m", "height_mm", "particle", "Particle", "u_height_mm", "note", "exclude", "dc_voltage",
    "drive_voltage_V", "drive_voltage_rms_V", "height [furlong]", "h" * 300, "=1+1", "time", "[", "/", "()",
)  # fmt: skip
"""Heads that are nearly, or again, those of a log."""
FEW = (
    "one", "two", "none", "equal", "scaled", "tiny", "huge", "zero", "sign", "noise", "particles", "times", "twice",
    "columns",
)  # fmt: skip
"""What may become of the readings of a log."""
INSTEAD = (
    "missing", "empty", "folder", "link out", "link round", "link in", "link nowhere", "pipe", "device",
    "endless device", "socket", "mark alone", "binary", "zip", "link to staff", "hidden", "closed",
)  # fmt: skip
"""What may stand in the place of a file or folder."""
