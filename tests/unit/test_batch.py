"""Many charts: one bad one never stops the rest, nothing is lost or done twice."""

import csv
import json
import os
import shutil
import signal
import subprocess
import sys
import time
from concurrent.futures import Executor, Future
from pathlib import Path

import pytest
from curvefit_cli.main import app
from curvefit_cli.show import ended

from curvefit.batch import JOURNAL, find_charts, read_many
from curvefit.errors import InputError

SAMPLES = Path(__file__).resolve().parents[2] / "sample_charts"
CHART = SAMPLES / "plotted-vector.pdf"  # a drawn page: the quickest to read


class Here(Executor):
    """Runs each job at once in this process."""

    def submit(self, fn, /, *args, **kwargs):
        future: Future = Future()
        try:
            future.set_result(fn(*args, **kwargs))
        except BaseException as error:
            future.set_exception(error)
        return future


@pytest.fixture
def shelf(tmp_path):
    """Charts of one stem in several folders, names with blanks and umlauts, and one bad file."""
    folder = tmp_path / "Kennlinien für Becken 2"
    (folder / "unten").mkdir(parents=True)
    shutil.copy(CHART, folder / "pump.pdf")
    shutil.copy(CHART, folder / "unten" / "pump.pdf")
    (folder / "bad.png").write_bytes(b"no picture")
    (folder / "readme.txt").write_text("no chart")
    return folder


def test_all_charts_are_read_and_the_bad_one_is_named(shelf, tmp_path):
    out = tmp_path / "out"
    jobs = find_charts([shelf], out)
    assert [j.relative for j in jobs] == ["bad.png", "pump.pdf", "unten/pump.pdf"]
    bad, *good = read_many(jobs, out, Here())
    assert bad.state == "failed"
    assert "bad.png" in bad.error
    for outcome, job in zip(good, jobs[1:], strict=True):
        assert outcome.state == "done"
        assert len(outcome.pages) == 1
        assert outcome.pages[0]["curves"] == 4
        assert (Path(job.folder) / "pump.curves.json").is_file()


def test_nothing_is_done_twice_until_it_changes(shelf, tmp_path):
    out = tmp_path / "out"
    jobs = find_charts([shelf], out)
    read_many(jobs, out, Here())
    assert [o.state for o in read_many(jobs, out, Here())] == ["kept"] * 3
    notes = Path(jobs[1].folder) / "pump.notes.toml"
    notes.write_text(notes.read_text() + '\n[[pump]]\nname = "1"\nspeed = "1234 rpm"\n')
    again = read_many(jobs, out, Here())
    assert [o.state for o in again] == ["kept", "done", "kept"]
    document = json.loads((Path(jobs[1].folder) / "pump.curves.json").read_text())
    assert document["pumps"][0]["speed"]["value"] == pytest.approx(1234)
    (Path(jobs[2].folder) / "pump.curves.csv").unlink()
    assert [o.state for o in read_many(jobs, out, Here())] == ["kept", "kept", "done"]


def test_other_options_are_another_job(shelf, tmp_path):
    out = tmp_path / "out"
    read_many(find_charts([shelf], out), out, Here())
    other = find_charts([shelf], out, {"units": {"head": "ft"}, "points": None})
    assert [o.state for o in read_many(other, out, Here())] == ["failed", "done", "done"]
    document = json.loads((Path(other[1].folder) / "pump.curves.json").read_text())
    assert {c["unit"] for c in document["curves"] if c["quantity"] == "head"} == {"[ft_i]"}


def test_a_journal_cut_short_loses_only_its_last_line(shelf, tmp_path):
    out = tmp_path / "out"
    jobs = find_charts([shelf], out)
    read_many(jobs, out, Here())
    journal = out / JOURNAL
    *whole, last = journal.read_text().splitlines(keepends=True)
    journal.write_text("".join(whole) + last[:40])
    lost = json.loads(last)["relative"]
    again = read_many(jobs, out, Here())
    assert {o.relative: o.state for o in again if o.state != "kept"} == {
        lost: "failed" if lost == "bad.png" else "done"
    }


def test_a_worker_that_dies_fails_its_chart_alone(shelf, tmp_path):
    class Dying(Here):
        def submit(self, fn, /, job):
            if job.relative == "pump.pdf":
                future: Future = Future()
                future.set_exception(RuntimeError("gone"))
                return future
            return super().submit(fn, job)

    outcomes = read_many(find_charts([shelf], tmp_path / "out"), tmp_path / "out", Dying())
    assert [o.state for o in outcomes] == ["failed", "failed", "done"]
    assert "gone" in outcomes[1].error


def test_results_are_no_inputs_and_missing_ones_are_named(shelf, tmp_path):
    read_many(find_charts([shelf], shelf / "out"), shelf / "out", Here())
    assert len(find_charts([shelf], shelf / "out")) == 3
    with pytest.raises(InputError, match="does not exist"):
        find_charts([shelf / "none"], tmp_path)
    (tmp_path / "empty").mkdir()
    with pytest.raises(InputError, match="no chart"):
        find_charts([tmp_path / "empty"], tmp_path)


def test_same_names_of_two_folders_do_not_meet(tmp_path):
    paths = []
    for name in ("a", "b"):
        (tmp_path / name).mkdir()
        paths.append(shutil.copy(CHART, tmp_path / name / "pump.pdf"))
    jobs = find_charts(paths, tmp_path / "out")
    assert len({j.folder for j in jobs}) == 2


def run(*arguments):
    return ended(lambda: app(args=[str(a) for a in arguments], standalone_mode=False), debug=False)


def test_the_command_writes_summary_and_index(shelf, tmp_path, capsys):
    out = tmp_path / "out"
    assert run("batch", shelf, "--out", out, "--workers", 1) == 5
    text = (out / "summary.csv").read_text(encoding="utf-8")
    rows = list(csv.DictReader(text.splitlines()))
    assert [r["input"] for r in rows] == ["bad.png", "pump.pdf", "unten/pump.pdf"]
    assert rows[1]["curves"] == "4"
    index = (out / "index.html").read_text(encoding="utf-8")
    assert index.index("bad.png") < index.index("pump.pdf")  # worst first
    assert "default-src 'none'" in index
    assert "bad.png" in capsys.readouterr().err


@pytest.mark.skipif(not hasattr(signal, "SIGKILL"), reason="no SIGKILL on this system")
def test_a_killed_run_goes_on_where_it_stopped(tmp_path):
    shelf = tmp_path / "shelf"
    shelf.mkdir()
    for i in range(4):
        shutil.copy(CHART, shelf / f"{i}.pdf")
    out = tmp_path / "out"
    command = [sys.executable, "-m", "curvefit_cli.main", "batch", str(shelf), "--out", str(out)]
    first = subprocess.Popen([*command, "--workers", "1"], start_new_session=True)
    journal = out / JOURNAL
    end = time.time() + 120
    while time.time() < end and (not journal.is_file() or not journal.read_text().count("\n")):
        time.sleep(0.05)
    os.killpg(first.pid, signal.SIGKILL)
    first.wait()
    done = journal.read_text().count("\n")
    assert 1 <= done < 4
    again = [*command[:4], "--resume", "--out", str(out), "--workers", "1"]
    finished = subprocess.run(again, capture_output=True, text=True)
    assert finished.returncode == 0, finished.stderr
    assert f"{done} were done before" in finished.stdout
    assert sum(1 for _ in out.rglob("*.curves.json")) == 4
