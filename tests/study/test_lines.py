"""Lines of keys, against the key's place in texts made for it."""

from hypothesis import given
from hypothesis import strategies as st

from sweep.study.lines import line_of, lines_of

TEXT = '''
[a]
x = 1 # [b]
"y" = "[c]"
[a.b]
z = """
w = 2
"""
list = [
  "k = 3",
]
[[events]]
time = 1
[[events]]
set = { "p.q" = 2 }
u.v = 4
'''


def test_lines():
    found = lines_of(TEXT)
    expected = {"a": 2, "a.x": 3, "a.y": 4, "a.b": 5, "a.b.z": 6, "a.b.list": 9, "events.0": 12, "events.0.time": 13}
    expected |= {"events.1": 14, "events.1.set": 15, "events.1.u.v": 16}
    assert expected == found
    assert 15 == line_of(found, "events.1.set.p.q")
    assert 1 == line_of(found, "nothing.of.it")


NAMES = st.text("abcde_", min_size=1, max_size=6)


@given(st.dictionaries(NAMES, st.dictionaries(NAMES, st.integers(), max_size=4), min_size=1, max_size=5), st.integers(0, 2))
def test_lines_of_tables(document, blanks):
    lines, expected = [], {}
    for table, keys in document.items():
        lines += ["# remark"] * blanks + [f"[{table}]"]
        expected[table] = len(lines)
        for key, value in keys.items():
            lines.append(f"  {key} = {value}")
            expected[f"{table}.{key}"] = len(lines)
    assert expected == lines_of("\n".join(lines))
