"""The locator against documents whose lines are known by construction."""

import random
import tomllib

import pytest

from massfit.io.network.locate import KeyPath, locate_keys, nearest_line

SCALARS = [
    "1", "-2.5e3", "true", "inf", "2016-03-01", "2016-03-01 12:00:00Z", "12:30:00", '"text"', "'C:\\path'", '""',
    '"[not # a = table]"', '"a \\" b"', '"""one line"""', '""""two" quotes"""""', "'''it's'''", "''''''", '""""""',
]  # fmt: skip
MULTI_LINE = ['"""\nfirst\n[no.table]\n"""', "'''\nx = 1\n# no comment\n'''", '"""a\\\n  b \\""" c\n"""']
KEYS = ["a", "bare-key", "under_score", "1234", '"quoted key"', "'literal.key'", '"esc\\"aped"', '"\\u00e9"', '""']


def plain(key: str) -> str:
    return next(iter(tomllib.loads(f"{key} = 0")))


class Writer:
    """A TOML writer that notes the line of everything it writes."""

    def __init__(self, seed: int) -> None:
        self.rng = random.Random(seed)
        self.text = ""
        self.lines: dict[KeyPath, int] = {}

    def put(self, text: str) -> None:
        self.text += text

    def note(self, path: KeyPath) -> None:
        self.lines.setdefault(path, self.text.count("\n") + 1)

    def gap(self, *, newlines: bool) -> None:
        choices = ["", " ", "\t"] + (["\n", " # a ] comment }\n", "\n\n  "] if newlines else [])
        self.put(self.rng.choice(choices))

    def value(self, path: KeyPath, depth: int) -> None:
        kind = self.rng.random()
        if depth > 2 or kind < 0.6:
            self.put(self.rng.choice(SCALARS if kind < 0.5 else MULTI_LINE))
        elif kind < 0.85:
            self.array(path, depth)
        else:
            self.inline_table(path, depth)

    def array(self, path: KeyPath, depth: int) -> None:
        self.put("[")
        count = self.rng.randrange(4)
        for position in range(count):
            self.gap(newlines=True)
            self.note((*path, position))
            self.value((*path, position), depth + 1)
            self.gap(newlines=True)
            if position < count - 1 or self.rng.random() < 0.5:
                self.put(",")
        self.gap(newlines=True)
        self.put("]")

    def inline_table(self, path: KeyPath, depth: int) -> None:
        self.put("{")
        keys = self.rng.sample(KEYS, self.rng.randrange(3))
        for position, key in enumerate(keys):
            self.put(", " if position else " ")
            self.pair((*path, plain(key)), key, depth)
        self.put(" }")

    def pair(self, path: KeyPath, written: str, depth: int) -> None:
        self.note(path)
        self.put(written)
        self.gap(newlines=False)
        self.put("=")
        self.gap(newlines=False)
        self.value(path, depth + 1)

    def body(self, table: KeyPath) -> None:
        for key in self.rng.sample(KEYS, self.rng.randrange(1, 5)):
            self.gap(newlines=True)
            if self.rng.random() < 0.3:
                self.note((*table, plain(key)))
                self.pair((*table, plain(key), "inner key"), f"{key} . 'inner key'", 0)
            else:
                self.pair((*table, plain(key)), key, 0)
            self.put(self.rng.choice(["\n", " # said [why]\n", "\r\n"]))

    def document(self) -> str:
        self.body(())
        for table in range(self.rng.randrange(4)):
            self.gap(newlines=True)
            self.note((f"table {table}",))
            self.note((f"table {table}", "sub"))
            self.put(f'["table {table}" . sub]\n')
            self.body((f"table {table}", "sub"))
        for site in range(self.rng.randrange(4)):
            self.gap(newlines=True)
            self.note(("site",))
            self.note(("site", site))
            self.put("[[site]]\n")
            self.body(("site", site))
            for deployment in range(self.rng.randrange(3)):
                self.note(("site", site, "deployment"))
                self.note(("site", site, "deployment", deployment))
                self.put("  [[ site.deployment ]] # indented\n")
                self.body(("site", site, "deployment", deployment))
                if self.rng.random() < 0.3:
                    self.note(("site", site, "deployment", deployment, "detail"))
                    self.put("[site.deployment.detail]\n")
                    self.body(("site", site, "deployment", deployment, "detail"))
        return self.text


def every_path(value: object, path: KeyPath = ()) -> set[KeyPath]:
    paths = {path} if path else set()
    items = value.items() if isinstance(value, dict) else enumerate(value) if isinstance(value, list) else ()
    for key, child in items:
        paths |= every_path(child, (*path, key))
    return paths


@pytest.mark.parametrize("seed", range(150))
def test_lines_of_generated_documents(seed: int) -> None:
    writer = Writer(seed)
    text = writer.document()
    parsed = tomllib.loads(text)
    found = locate_keys(text)
    assert found == writer.lines
    # the standard parser is the outside witness that every path is a real one and none is left out
    assert set(found) == every_path(parsed)


def test_the_generator_reaches_the_hard_cases() -> None:
    texts = [Writer(seed).document() for seed in range(150)]
    for piece in ('"""', "'''", "[[ site.deployment ]]", "{ ", "\r\n", "[site.deployment.detail]", "]\n"):
        assert sum(piece in text for text in texts) > 10


@pytest.mark.parametrize("text", ["", "# only a comment", "\n\n", "a = 1", "[a]", "[[a]]", "a = []", "a = {}"])
def test_small_documents(text: str) -> None:
    assert set(locate_keys(text)) == every_path(tomllib.loads(text))


def test_a_missing_key_has_the_line_of_its_table() -> None:
    lines = locate_keys('[network]\nname = "x"\n\n[[site]]\nid = "A"\n')
    assert nearest_line(lines, ("site", 0, "latitude")) == 4
    assert nearest_line(lines, ("corrections", "tides")) is None
