"""Line numbers of keys, for every construction of the language."""

from __future__ import annotations

import tomllib

from synth.spec.toml_lines import KeyPath, key_lines

TEXT = '''\
# comment with [header] and key = 1
top = 1
"quoted key" = "a # b = ]"
a.b = 2
[target]   # comment
text = """
[not.a.header]
x = 1 \\""" still
"""
raw = \'\'\'
y = 2\'\'\'
list = [
  1,   # one
  { p = "]", q = [1,
     2] },
]
[[many]]
k = 1
[[many]]
k = 2
[many.sub]
z = 2024-01-01 10:00:00
[[many.deep]]
w = 'it''
[ "odd" . name ]
last = { inner = { e = 1.5e3 } }
'''.replace("'it''", "'it'")


def test_lines_of_every_construction() -> None:
    lines = key_lines(TEXT)
    expected: dict[KeyPath, int] = {
        ("top",): 2,
        ("quoted key",): 3,
        ("a", "b"): 4,
        ("target",): 5,
        ("target", "text"): 6,
        ("target", "raw"): 10,
        ("target", "list"): 12,
        ("target", "list", 0): 13,
        ("target", "list", 1): 14,
        ("target", "list", 1, "p"): 14,
        ("target", "list", 1, "q", 1): 15,
        ("many", 0, "k"): 18,
        ("many", 1, "k"): 20,
        ("many", 1, "sub", "z"): 22,
        ("many", 1, "deep", 0, "w"): 24,
        ("odd", "name"): 25,
        ("odd", "name", "last", "inner", "e"): 26,
    }
    assert {path: lines.get(path) for path in expected} == expected


def test_every_key_of_a_valid_text_is_found() -> None:
    found = set(key_lines(TEXT))

    def walk(node: object, path: KeyPath) -> None:
        if path:
            assert path in found
        entries = node.items() if isinstance(node, dict) else enumerate(node) if isinstance(node, list) else ()
        for key, value in entries:
            walk(value, (*path, key))

    walk(tomllib.loads(TEXT), ())


def test_a_text_that_is_not_valid_gives_the_lines_so_far() -> None:
    assert key_lines("a = 1\nb = [1, 2\n")[("a",)] == 1
    assert key_lines("a = 1\n= 3\n") == {("a",): 1}
