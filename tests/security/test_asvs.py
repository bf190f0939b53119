"""The table of requirements names tests that exist, and is complete."""

import ast
from functools import cache
from pathlib import Path

import pytest

from tests.security.asvs import REQUIREMENTS

TESTS = Path(__file__).resolve().parents[1]
# How many requirements of levels 1 and 2 apply, chapter by chapter (ASVS 5.0.0).
CHAPTERS = {1: 19, 2: 11, 3: 18, 4: 4, 5: 9, 6: 28, 7: 16, 8: 7, 11: 13, 12: 8, 13: 13, 14: 9, 15: 13, 16: 16}


@cache
def names_in(file):
    tree = ast.parse((TESTS / file).read_text(encoding="utf-8"))
    return {node.name for node in ast.walk(tree) if isinstance(node, ast.FunctionDef) and node.name.startswith("test_")}


def test_all_that_apply_are_there():
    counts = {}
    for number in REQUIREMENTS:
        chapter = int(number[1:].split(".")[0])
        counts[chapter] = counts.get(chapter, 0) + 1
    assert counts == CHAPTERS
    assert len(REQUIREMENTS) == 184


@pytest.mark.parametrize("number", REQUIREMENTS)
def test_each_has_a_test_that_exists_or_a_reason(number):
    answer = REQUIREMENTS[number]
    if isinstance(answer, str):
        assert len(answer.split()) >= 5
    else:
        assert answer[1] in names_in(answer[0])


def test_most_are_tested():
    assert sum(isinstance(answer, tuple) for answer in REQUIREMENTS.values()) >= 140
