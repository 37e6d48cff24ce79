"""The recipes of the manual run as they stand, one after the other in one folder."""

from __future__ import annotations

import re

import pytest

from sfcpart.manual import PAGES, read_page

BLOCKS = re.findall(r"^```(\w*)\n(.*?)^```$", read_page("recipes"), re.M | re.S)


@pytest.mark.large
def test_every_recipe_but_the_last_runs_in_one_process(sfcpart, capsys):
    ran = {"sh": 0, "python": 0}
    for language, text in BLOCKS[:-1]:
        ran[language] += 1
        if language == "python":
            exec(compile(text, "recipes.md", "exec"), {})
            continue
        for line in text.splitlines():
            code, out, err = sfcpart(line.removeprefix("sfcpart "))
            assert (code, err) == (0, ""), line
            assert out, line
    assert ran == {"sh": 4, "python": 3}
    told = capsys.readouterr().out
    assert told == "" or "missing" in told


@pytest.mark.large
def test_restarting_on_other_ranks_misses_no_value(sfcpart, capsys):
    sfcpart("split meshes/channel_mixed.vtu --parts 8 -o parts --weight work")
    line = next(text for _, text in BLOCKS if text.startswith("sfcpart rebalance"))
    assert sfcpart(line.strip().removeprefix("sfcpart ")).code == 0
    program = next(text for _, text in BLOCKS if "missing" in text)
    exec(compile(program, "recipes.md", "exec"), {})
    assert " 0 missing" in capsys.readouterr().out


@pytest.mark.parametrize("page", PAGES)
def test_every_page_is_there_and_begins_with_its_title(page):
    text = read_page(page)
    assert text.startswith("# ")
    assert text.endswith("\n")


def test_there_are_five_recipes_and_the_last_is_a_program_for_ranks():
    heads = re.findall(r"^## (\d)\. ", read_page("recipes"), re.M)
    assert heads == ["1", "2", "3", "4", "5"]
    assert "from mpi4py import MPI" in BLOCKS[-1][1]
