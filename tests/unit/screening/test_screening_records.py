"""Shards, progress, summary, failures, memory, cases: the small parts of a screen."""

from __future__ import annotations

import gzip
import json
from dataclasses import replace
from pathlib import Path

import pytest

from topovet.errors import InputError
from topovet.screening.cases import find_cases
from topovet.screening.failures import forget_failure, record_failure
from topovet.screening.journal import Journal, duration, step_text
from topovet.screening.memory import AT_REST, COPIES, estimate
from topovet.screening.progress import BASE_WORK, Progress
from topovet.screening.records import Job, Outcome, ScreenCase, ScreenResult
from topovet.screening.shards import Shard, cases_of, parse_shard
from topovet.screening.summary import MOST_FAILURES, summary_lines

VETTED = Outcome("a", "vetted", "strong-ti", "B", (("gap-closes", "error"),), 2.0)


def _case(slug: str, size: int = 0) -> ScreenCase:
    return ScreenCase(slug, slug, f"/{slug}", {}, size)


@pytest.mark.parametrize("text", ["0/3", "4/3", "1", "a/b", "1/0", "-1/3", "1/3/5", "1.0/2", ""])
def test_a_wrong_shard_is_refused(text: str) -> None:
    with pytest.raises(ValueError, match="/"):
        parse_shard(text)


@pytest.mark.parametrize("count", [1, 2, 3, 7, 20])
def test_shards_part_the_cases_evenly_and_completely(count: int) -> None:
    cases = [_case(f"c{i:02d}") for i in range(11)]
    shards = [cases_of(parse_shard(f"{i}/{count}"), cases[::-1]) for i in range(1, count + 1)]
    assert sorted(c.slug for shard in shards for c in shard) == [c.slug for c in cases]
    assert max(map(len, shards)) - min(map(len, shards)) <= 1


def test_jobs_and_outcomes_survive_the_way_to_a_worker() -> None:
    job = Job("s", 'n"\n\udcff', "/p", "/f", {"surface": [0, 0, 1]}, True, False, "c")
    assert Job.from_json(job.to_json().encode()) == job
    assert "\n" not in job.to_json()
    assert Outcome.from_json(VETTED.to_json()) == VETTED


def test_rate_and_time_left_weigh_cases_by_size() -> None:
    now = [0.0]
    cases = [_case("big", 8 * BASE_WORK), _case("small"), _case("small2")]
    progress = Progress(cases, 5, clock=lambda: now[0])
    now[0] = 90.0
    step = progress.step(cases[0], VETTED)
    assert (step.done, step.total) == (6, 8)
    assert step.per_hour == pytest.approx(40)
    assert step.left_s == pytest.approx(20)  # 9 parts of the work took 90 s, 2 are left
    progress.step(cases[1], VETTED)
    assert progress.step(cases[2], VETTED).left_s == 0


@pytest.mark.parametrize(("seconds", "text"), [(40, "40 s"), (180, "3 min"), (7800, "2 h 10 min")])
def test_durations(seconds: float, text: str) -> None:
    assert duration(seconds) == text


def test_a_log_line_is_one_line_and_harmless(tmp_path: Path) -> None:
    case = replace(_case("a"), name='<b>"\x1b[31m\nx')
    failed = Outcome("a", "failed", message="no\nway \x07")
    step = Progress([case], 0).step(case, failed)
    journal = Journal(tmp_path / "deep" / "screen.log")
    journal(step_text(step))
    text = (tmp_path / "deep" / "screen.log").read_text()
    assert text.count("\n") == 1
    assert "\x1b" not in text
    assert "\x07" not in text
    assert '<b>"\\x1b[31m x: failed: no way \\x07' in text


def test_a_log_that_cannot_be_written_stops_nothing(tmp_path: Path) -> None:
    (tmp_path / "file").write_text("")
    journal = Journal(tmp_path / "file" / "screen.log")
    journal("line")
    assert "cannot be written" in journal.broken


def test_summary_counts_what_came_out(tmp_path: Path) -> None:
    failures = [Outcome(f"f{i}", "failed", message=f"no {i}") for i in range(MOST_FAILURES + 2)]
    known = replace(VETTED, slug="b", status="unchanged", class_="trivial", flags=())
    result = ScreenResult(tmp_path, (VETTED, known, *failures), 61.0, ("a note",), {"a": "A"})
    text = "\n".join(summary_lines(result))
    assert "24 cases: 1 vetted, 1 unchanged, 22 failed; 61 s" in text
    assert "strong-ti 1, trivial 1" in text
    assert "gap-closes 1" in text
    assert "f0: no 0" in text
    assert "and 2 more" in text
    assert "note: a note" in text


def test_failure_replaces_the_results_and_can_be_forgotten(tmp_path: Path) -> None:
    for name in ("verdict.json", "report.html", "screened.json"):
        (tmp_path / name).write_text("old")
    outcome = Outcome("x", "failed", message="broken\nhere", file="/x/\udcff_hr.dat", line=7)
    record_failure(tmp_path, name='<i>"', path="/x/\udcff", outcome=outcome)
    assert [p.name for p in tmp_path.iterdir()] == ["failure.json"]
    document = json.loads((tmp_path / "failure.json").read_text(encoding="utf-8"))
    assert document.pop("when").endswith("Z")
    assert document == {
        "schema": "topovet.failure/1",
        "case": {"name": '<i>"', "path": "/x/\\udcff"},
        "error": {"file": "/x/\\udcff_hr.dat", "line": 7, "message": "broken here"},
    }
    forget_failure(tmp_path)
    forget_failure(tmp_path)
    assert not list(tmp_path.iterdir())


@pytest.mark.parametrize("packed", [False, True])
@pytest.mark.parametrize(
    ("name", "head"),
    [("X_hr.dat", "header\n 30\n 5\n"), ("X_tb.dat", "header\n1 0 0\n0 1 0\n0 0 1\n 30\n 5\n")],
)
def test_memory_follows_from_the_head_of_the_file(
    tmp_path: Path, name: str, head: str, packed: bool
) -> None:
    data = (head + "x" * 40 * 30 * 30 * 5).encode()
    path = tmp_path / (name + ".gz" * packed)
    path.write_bytes(gzip.compress(data, 0) if packed else data)
    size, memory = estimate(tmp_path)
    assert size == path.stat().st_size
    assert memory == AT_REST + COPIES * 16 * 5 * 900


@pytest.mark.parametrize(
    "text",
    ["", "header\n", "header\nx\n5\n", "header\n-1\n5\n", "h\n0\n1\n", "h\n\n\n", "h" * 9000],
)
def test_memory_of_a_damaged_file_is_that_of_an_empty_process(tmp_path: Path, text: str) -> None:
    (tmp_path / "X_hr.dat").write_text(text)
    assert estimate(tmp_path) == (0, AT_REST)
    assert estimate(tmp_path / "nowhere") == (0, AT_REST)


def test_a_promise_that_the_file_cannot_keep_is_not_believed(tmp_path: Path) -> None:
    (tmp_path / "X_hr.dat").write_text("header\n 999999\n 999999\n")
    assert estimate(tmp_path)[1] < AT_REST + (1 << 20)


def test_cases_of_a_folder_are_named_after_their_place(tmp_path: Path) -> None:
    for place in ("b/GX-2", "a"):
        (tmp_path / "root" / place).mkdir(parents=True)
        (tmp_path / "root" / place / "X_hr.dat").write_text("")
    found = find_cases(tmp_path / "root", out=tmp_path / "out", settings={"effort": "quick"})
    assert [(c.slug, c.name) for c in found.cases] == [("a", "a"), ("b__GX-2", "b/GX-2")]
    assert all(c.settings == {"effort": "quick"} for c in found.cases)
    assert found.cases[0].path == str(tmp_path / "root" / "a")


def test_a_root_that_is_a_case_is_one_case(tmp_path: Path) -> None:
    (tmp_path / "GX-1").mkdir()
    (tmp_path / "GX-1" / "X_hr.dat").write_text("")
    found = find_cases(tmp_path / "GX-1", out=tmp_path / "out", settings={})
    assert [c.name for c in found.cases] == ["GX-1"]


def test_a_list_adds_what_it_states(tmp_path: Path) -> None:
    (tmp_path / "l.csv").write_text("path,name,filling,surface,why\nx,,18,,\ny,Y,,0 0 1,z\n")
    found = find_cases(tmp_path / "l.csv", out=tmp_path / "out", settings={"effort": "quick"})
    y, x = found.cases
    assert x.settings == {"effort": "quick", "filling": 18, "stated_in": "l.csv"}
    assert y.settings == {"effort": "quick", "name": "Y", "surface": [0, 0, 1]}
    assert found.notes == ('columns of l.csv that are not used: "why"',)
    json.dumps([c.settings for c in found.cases])


@pytest.mark.parametrize("name", ["empty", "X_hr.dat"])
def test_no_cases_is_an_error(tmp_path: Path, name: str) -> None:
    (tmp_path / "empty").mkdir()
    (tmp_path / "X_hr.dat").write_text("")
    with pytest.raises(InputError, match=r"topovet vet|the folder that holds the cases"):
        find_cases(tmp_path / name, out=tmp_path / "out", settings={})


def test_dossiers_never_go_into_a_case_folder(tmp_path: Path) -> None:
    (tmp_path / "GX-1").mkdir()
    (tmp_path / "GX-1" / "X_hr.dat").write_text("")
    (tmp_path / "l.csv").write_text("path\nGX-1\n")
    with pytest.raises(InputError, match="the same folder as --out"):
        find_cases(tmp_path, out=tmp_path / "GX-1" / "..", settings={})
    for list_of_one in ("path\nGX-1\n", "path,name\nGX-1/X_hr.dat,GX-1\n"):
        (tmp_path / "l.csv").write_text(list_of_one)
        with pytest.raises(InputError, match="choose another --out"):
            find_cases(tmp_path / "l.csv", out=tmp_path, settings={})


def test_shard_is_shown_as_it_is_written() -> None:
    assert str(Shard(3, 20)) == "3/20"
