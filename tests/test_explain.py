"""Every hint, verdict and law has a page, and the pages say all three things."""

import ast
import re
from pathlib import Path

import pytest

from fvcheck.cli.app import run
from fvcheck.errors import SetupError
from fvcheck.hints import PAGES
from fvcheck.laws import law_names
from fvcheck.pages import find_page, topics
from fvcheck.verdict import VERDICTS

PACKAGE = Path(__file__).parent.parent / "fvcheck"
CODE = re.compile(r"[a-z0-9]+(-[a-z0-9]+)+")


def used_codes() -> dict[str, str]:
    """Code -> module, of every ``Hint(…)``; of a code held in a name, all that the function may mean."""
    found = {}
    for path in sorted(PACKAGE.rglob("*.py")):
        tree = ast.parse(path.read_text(encoding="utf-8"))
        for function in [node for node in ast.walk(tree) if isinstance(node, ast.FunctionDef)]:
            calls = [
                node
                for node in ast.walk(function)
                if isinstance(node, ast.Call) and isinstance(node.func, ast.Name) and node.func.id == "Hint"
            ]
            for call in calls:
                first = call.args[0] if call.args else next(k.value for k in call.keywords if k.arg == "code")
                within = [first] if isinstance(first, ast.Constant) else list(ast.walk(function))
                for node in within:
                    text = node.value if isinstance(node, ast.Constant) else None
                    if isinstance(text, str) and (node is first or CODE.fullmatch(text)):
                        found[text] = path.name
    return found


def test_the_search_finds_codes_written_out_and_codes_held_in_names():
    assert {"inviscid", "stitched-points", "reduced-pressure", "inner-lines"} <= set(used_codes())


def test_every_hint_in_use_has_a_page():
    assert {code: path for code, path in used_codes().items() if code not in PAGES} == {}


def test_no_page_is_left_over_from_a_hint_that_is_gone():
    assert set(PAGES) - set(used_codes()) == set()


def test_every_law_and_every_verdict_has_a_page():
    built_in = set(law_names()) & {"mass", "momentum", "kinetic-energy", "heat", "total-energy"}
    assert len(built_in) == 5
    for topic in [*built_in, *VERDICTS]:
        find_page(topic)


def test_the_topics_of_the_contract_are_there():
    words = ("laws", "verdicts", "bands", "surfaces", "exit", "units", "signs", "scale", "datum")
    assert set(words) <= set(topics()["words"])


@pytest.mark.parametrize("topic", [topic for group in topics().values() for topic in group])
def test_a_page_says_what_was_seen_why_it_matters_and_what_to_do(topic, capsys):
    page = find_page(topic)
    assert page.seen and page.why and page.do
    assert run(["explain", topic]) == 0
    lines = capsys.readouterr().out.splitlines()
    assert lines[0] == topic
    assert any(line.startswith("why  ") for line in lines) and any(line.startswith("do   ") for line in lines)
    assert max(map(len, lines)) <= 80


def test_without_a_topic_all_topics_are_listed(capsys):
    assert run(["explain"]) == 0
    shown = capsys.readouterr().out
    assert all(topic in shown.split() for group in topics().values() for topic in group)


def test_an_unknown_topic_names_the_nearest():
    with pytest.raises(SetupError, match="'mesh-limited'"):
        find_page("mesh-limit")
