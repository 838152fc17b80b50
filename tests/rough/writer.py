"""A process that writes two results to folders as it is told, in children that may be killed; see test_killed.py.

A line of JSON a call on stdin, ``{"jobs": [...]}`` or ``{"look": folder}``; a line of JSON for each on stdout.
"""

from __future__ import annotations

import hashlib
import json
import os
import shutil
import signal
import sys
import time
from pathlib import Path

from gradeline.errors import OutputError
from gradeline.loader import read_survey
from gradeline.reduction import reduce
from gradeline.report import one_writer, swap, write
from gradeline.report.figures import pictures


def die():
    os.kill(os.getpid(), signal.SIGKILL)


def die_at(moment):
    """Kill this process at a moment of the swap that a random time would all but never hit."""
    exchanged, rename = swap.exchanged, Path.rename
    if moment == "before the exchange":
        swap.exchanged = lambda *_: die()
    elif moment == "after the exchange":
        swap.exchanged = lambda *both: exchanged(*both) and die()
    elif moment == "tidying":
        shutil.rmtree = lambda *_, **__: die()
    else:
        last = {"between two renames": "old", "after two renames": "out"}[moment]
        swap.exchanged = lambda *_: False

        def renamed(self, target):
            rename(self, target)
            if Path(target).name == last:
                die()

        Path.rename = renamed


def on_events(last):
    """Count what this process does to files, by Python's own audit; kill it just before the last one of them."""
    count = 0

    def heard(event, _):
        nonlocal count
        if event == "open" or event.startswith(("os.", "shutil.", "tempfile.", "fcntl.")):
            count += 1
            if count == last:
                die()

    sys.addaudithook(heard)
    return lambda: count


def hashes(folder):
    found = sorted(path for path in Path(folder).rglob("*") if path.is_file())
    return {str(path.relative_to(folder)): hashlib.sha256(path.read_bytes()).hexdigest() for path in found}


def do(job, results):
    if "die_at" in job:
        die_at(job["die_at"])
    counted = on_events(job["events"]) if "events" in job else None
    if "patience" in job:
        one_writer.PATIENCE = job["patience"]
    try:
        write(
            results[job["which"]],
            Path(job["folder"]),
            formats=job["formats"],
            overwrite=job.get("overwrite", True),
        )
    except OutputError as error:
        return str(error)
    return f"{counted()} events" if counted else ""


def started(job, results):
    reading, writing = os.pipe()
    child = os.fork()
    if child:
        os.close(writing)
        return child, reading
    os.write(writing, do(job, results).encode())
    os._exit(0)


def carry_out(jobs, results):
    begun = [started(job, results) for job in jobs]
    for job, (child, _) in zip(jobs, begun, strict=True):
        if "kill_after" in job:
            time.sleep(job["kill_after"])
            os.kill(child, signal.SIGKILL)  # not yet waited for, so that the number is still its own
    told = []
    for child, reading in begun:
        with os.fdopen(reading, "rb") as pipe:
            said = pipe.read().decode()
        _, status = os.waitpid(child, 0)
        told.append({"killed": os.WIFSIGNALED(status), "said": said})
    return told


def main(survey):
    read = read_survey(Path(survey))
    results = {
        name: reduce(read, level=level, monte_carlo=False) for name, level in (("old", 0.9), ("new", 0.95))
    }
    pictures(results["old"], svg=True, png=False)  # so that the children find all modules loaded
    print(json.dumps("ready"), flush=True)
    for line in sys.stdin:
        asked = json.loads(line)
        answer = hashes(asked["look"]) if "look" in asked else carry_out(asked["jobs"], results)
        print(json.dumps(answer), flush=True)


if __name__ == "__main__":
    main(sys.argv[1])
