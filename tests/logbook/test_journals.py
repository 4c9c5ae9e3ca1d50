"""The logbook on disk: nothing lost, nothing invented, whatever kills, fills or edits it."""

from __future__ import annotations

import json
import multiprocessing
import os
import signal
import subprocess
import sys
import time

import pytest

from stackmill.errors import FileAccessError, InputErrors
from stackmill.logbook import journal
from stackmill.logbook.journal import append, read_journal


def begun(path):
    append(path, "start", {"job": "x"}, create=True)
    return path


def test_entries_come_back_as_they_were_and_a_void_hides_one(tmp_path):
    path = begun(tmp_path / "run.jsonl")
    append(path, "note", {"text": "schön, 3 µm"})
    append(path, "note", {"text": "wrong"})
    append(path, "void", {"entry": 3, "why": "typing"})
    found = read_journal(path)
    assert [e.number for e in found.entries] == [1, 2, 3, 4]
    assert [e.says.get("text") for e in found.valid] == [None, "schön, 3 µm"]
    assert found.torn == ()


def test_a_new_logbook_is_never_laid_over_an_old_one(tmp_path):
    path = begun(tmp_path / "run.jsonl")
    with pytest.raises(FileAccessError, match="exists"):
        append(path, "start", {}, create=True)
    with pytest.raises(FileAccessError, match="no such file"):
        append(tmp_path / "other.jsonl", "note", {"text": "x"})
    assert not (tmp_path / "other.jsonl").exists()


@pytest.mark.parametrize("cut", [1, 10, 40])
def test_a_torn_last_line_is_skipped_and_the_next_append_begins_a_line_of_its_own(tmp_path, cut):
    path = begun(tmp_path / "run.jsonl")
    append(path, "note", {"text": "kept"})
    append(path, "note", {"text": "lost in the crash"})
    whole = path.read_bytes()
    path.write_bytes(whole[:-cut])
    assert [e.says.get("text") for e in read_journal(path).entries][1] == "kept"
    append(path, "note", {"text": "after"})
    found = read_journal(path)
    texts = [e.says.get("text") for e in found.entries]
    assert texts[1] == "kept"
    assert texts[-1] == "after"
    if cut > 1:
        assert found.torn == (3,)
        assert found.entries[-1].number == 4
    else:  # only the line break was missing: the entry itself is whole
        assert texts == [None, "kept", "lost in the crash", "after"]


@pytest.mark.parametrize(
    ("change", "says"),
    [
        (lambda lines: [lines[0], lines[1].replace('"kind": "note"', '"kind": "wish"'), lines[2]], "is no entry"),
        (lambda lines: [lines[0], lines[2]], "does not say that it is entry 2"),
        (lambda lines: [lines[0], lines[1].replace('"text"', "text"), lines[2]], "is no JSON"),
        (lambda lines: [lines[0], '{"n": 2, "kind": "note"}', lines[2]], "when it was written"),
        (lambda lines: [lines[0], "[2]", lines[2]], "is no entry"),
        (lambda lines: lines[1:], "does not say that it is entry 1"),
        (lambda _lines: [], "does not begin with a start"),
    ],
)
def test_a_logbook_edited_by_hand_is_refused_with_its_line(tmp_path, change, says):
    path = begun(tmp_path / "run.jsonl")
    append(path, "note", {"text": "one"})
    append(path, "note", {"text": "two"})
    lines = change(path.read_text(encoding="utf-8").splitlines())
    path.write_text("".join(line + "\n" for line in lines), encoding="utf-8")
    with pytest.raises(InputErrors) as refused:
        read_journal(path)
    assert says in refused.value.errors[0].what
    assert refused.value.errors[0].line


def _many(path, name, count):
    for k in range(count):
        append(path, "note", {"text": f"{name} {k}"})


@pytest.mark.independent
def test_two_processes_append_a_thousand_each_and_nothing_is_lost(tmp_path):
    path = begun(tmp_path / "run.jsonl")
    context = multiprocessing.get_context("spawn")
    workers = [context.Process(target=_many, args=(path, name, 1000)) for name in "ab"]
    for worker in workers:
        worker.start()
    for worker in workers:
        worker.join()
    found = read_journal(path)
    assert [e.number for e in found.entries] == list(range(1, 2002))
    for name in "ab":
        own = [e.says["text"] for e in found.entries if str(e.says.get("text", "")).startswith(name)]
        assert own == [f"{name} {k}" for k in range(1000)]


WRITER = """
import sys
from pathlib import Path
from stackmill.logbook.journal import append
k = int(sys.argv[2])
while True:
    append(Path(sys.argv[1]), "note", {"text": k})
    print(k, flush=True)
    k += 1
"""


def kill_often(path, times):
    """Kill a writer again and again; give every number that was reported written."""
    reported = []
    for k in range(times):
        writer = subprocess.Popen(
            [sys.executable, "-c", WRITER, str(path), str(1000 * k)], stdout=subprocess.PIPE, text=True
        )
        assert writer.stdout is not None
        first = writer.stdout.readline()  # it is up and writing
        time.sleep(0.002 * (k % 5))
        os.kill(writer.pid, signal.SIGKILL)
        rest, _ = writer.communicate()
        reported += [int(number) for number in (first + rest).split("\n")[:-1]]
    return reported


def check_kills(path, times):
    reported = kill_often(begun(path), times)
    found = read_journal(path)
    texts = [e.says["text"] for e in found.entries[1:]]
    assert set(reported) <= set(texts)  # nothing lost
    assert len(texts) == len(set(texts))
    for k in range(times):  # nothing invented: each writer's numbers without a gap
        own = [n for n in texts if n // 1000 == k]
        assert own == list(range(1000 * k, 1000 * k + len(own)))


@pytest.mark.independent
def test_kill_nine_loses_and_invents_nothing(tmp_path):
    check_kills(tmp_path / "run.jsonl", 10)


@pytest.mark.slow
@pytest.mark.independent
def test_two_hundred_times_kill_nine_loses_and_invents_nothing(tmp_path):
    check_kills(tmp_path / "run.jsonl", 200)


def test_a_full_disk_is_told_and_leaves_the_old_content_whole(tmp_path, monkeypatch):
    path = begun(tmp_path / "run.jsonl")
    before = path.read_bytes()
    real = os.write

    def full(file, content):
        return real(file, content[: len(content) // 2])

    monkeypatch.setattr(journal.os, "write", full)
    with pytest.raises(FileAccessError, match="no space left"):
        append(path, "note", {"text": "too much"})
    monkeypatch.undo()
    assert path.read_bytes() == before
    append(path, "note", {"text": "there is room again"})
    assert json.loads(path.read_bytes().splitlines()[-1])["n"] == 2


def test_what_is_no_plain_file_is_refused(tmp_path):
    pipe = tmp_path / "pipe"
    os.mkfifo(pipe)
    for path in (pipe, journal.Path("/dev/null")):
        with pytest.raises(FileAccessError, match="not a plain file"):
            append(path, "note", {"text": "x"})
