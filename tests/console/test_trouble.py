"""A problem in a file: place, source line, caret under the value, what to do."""

from __future__ import annotations

import errno
from io import StringIO

import pytest
from rich.console import Console

from rigd.console.output import Output
from rigd.console.trouble import explain, print_problems, problem_block
from rigd.model.problems import Problem, Severity


def shown(*problems: Problem, width: int = 100) -> list[str]:
    out = StringIO()
    console = Console(file=out, width=width, force_terminal=False)
    if len(problems) == 1:
        console.print(problem_block(problems[0]), crop=False)
    else:
        print_problems(console, problems)
    return [line.rstrip() for line in out.getvalue().splitlines()]


@pytest.mark.parametrize(
    ("line", "key", "marked"),
    [
        ('bore = "10.30"', "pumps[PU-A].bore", '"10.30"'),
        ('  rate_max   =   "5 mL"   # fast', "pumps[PU-A].rate_max", '"5 mL"'),
        ('when = { tag = "PT-9", above = "6 bar" }', "alarms[X].when.tag", '"PT-9"'),
        ('positions = ["a", "b"]', "valves[V].positions[2]", '["a", "b"]'),
        ("syringes = 7", "pumps[P].syringes", "7"),
        ("[[pumps]]", "pumps[PU-A].bore", "[[pumps]]"),
        ("not toml at all   # x", "", "not toml at all"),
    ],
)
def test_the_caret_stands_under_what_is_meant(tmp_path, line, key, marked):
    path = tmp_path / "rig.toml"
    path.write_text(f"# head\n{line}\n")
    rows = shown(Problem("c", "found", "do this", file=str(path), line=2, key=key))
    source = next(row for row in rows if row.startswith("  2 | "))
    caret = next(row for row in rows if set(row.split("|")[-1].strip()) == {"^"})
    start, end = caret.index("^"), caret.rindex("^") + 1
    assert source[start:end] == marked


def test_all_parts_are_there(tmp_path):
    path = tmp_path / "rig.toml"
    path.write_text('bore = "10.30"\n')
    text = "\n".join(shown(Problem("c", "'10.30' has no unit", 'write "10.30 mm"', file=str(path), line=1, key="bore")))
    assert f"{path}:1" in text
    assert "error" in text
    assert "'10.30' has no unit" in text
    assert 'do: write "10.30 mm"' in text


def test_a_file_that_cannot_be_shown_still_gives_its_message():
    assert shown(Problem("c", "found x", "do y", file="/no/such.toml", line=3, key="a")) == [
        "error  /no/such.toml:3  a",
        "  found x",
        "  do: do y",
    ]


def test_the_caret_finds_its_table_in_a_list_on_one_line(tmp_path):
    path = tmp_path / "r.toml"
    line = 'trip_when = [{ tag = "PT-1", above = "8 bar" }, { tag = "PT-2", above = "22 bar" }]'
    path.write_text(line + "\n")
    key = "interlocks[P].trip_when[2].above"
    rows = shown(Problem("c", "found x", "do y", file=str(path), line=1, key=key))
    assert rows[2].index("^") - rows[1].index("trip_when") == line.index('"22 bar"')
    assert rows[2].count("^") == len('"22 bar"')


def test_square_brackets_of_files_are_not_taken_for_markup(tmp_path):
    path = tmp_path / "r.toml"
    path.write_text("[bold]x = 1\n")
    rows = shown(Problem("c", "[red]found[/]", "[link]", file=str(path), line=1, key="pumps[red].x"))
    text = "\n".join(rows)
    assert "[red]found[/]" in text
    assert "pumps[red].x" in text
    assert "[bold]x = 1" in text


def test_many_are_counted():
    problems = [Problem("a", "1"), Problem("b", "2"), Problem("c", "3", severity=Severity.WARNING)]
    assert shown(*problems)[-1] == "2 errors, 1 warning or note"


def test_a_full_disk_is_no_fault_of_the_program(capsys):
    assert explain(OSError(errno.ENOSPC, "No space left on device", "report.html"), Output()) == 2
    said = " ".join(capsys.readouterr().err.split())
    assert "report.html: nothing could be written there (No space left on device); free some space" in said
    assert "bug report" not in said
