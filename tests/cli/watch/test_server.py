"""The server: to this machine alone, its own results alone, and what it says of the page."""

from __future__ import annotations

import http.client
import os
import socket
import threading
import time
from collections.abc import Iterator
from pathlib import Path

import pytest

from gradeline.cli.watch.live import Live, Shown, page_of
from gradeline.cli.watch.server import Server, inside, serving

REPORT = (
    '<!DOCTYPE html>\n<html lang="en">\n<head>\n<meta http-equiv="Content-Security-Policy" content="default-src '
    "'none'\">\n<title>Bench</title>\n</head>\n<body>\n<main>The report</main>\n</body>\n</html>\n"
)


@pytest.fixture
def served(tmp_path: Path) -> Iterator[Server]:
    folder = tmp_path / "out" / "reduction"
    (folder / "figures").mkdir(parents=True)
    (folder / "runs.csv").write_text("run\n1\n")
    (folder / "figures" / "residuals.svg").write_text("<svg/>")
    (folder / "notes.txt").write_text("not a result")
    (tmp_path / "out" / "secret.csv").write_text("outside")
    live = Live("bench")
    live.good(REPORT, "14:30:12")
    with serving(live, folder) as server:
        yield server


def ask(server: Server, path: str, method: str = "GET", **headers: str) -> tuple[int, dict[str, str], str]:
    connection = http.client.HTTPConnection("127.0.0.1", server.server_port, timeout=10)
    connection.request(method, path, headers=headers)
    answer = connection.getresponse()
    text = answer.read().decode()
    connection.close()
    return answer.status, {name.lower(): value for name, value in answer.getheaders()}, text


def test_it_listens_on_the_loopback_alone(served: Server) -> None:
    assert served.socket.getsockname()[0] == "127.0.0.1"
    assert served.address == f"http://127.0.0.1:{served.server_port}/"


def test_the_page_brings_its_own_rules(served: Server) -> None:
    status, headers, page = ask(served, "/")
    assert status == 200
    policy = headers["content-security-policy"]
    nonce = policy.split("'nonce-")[1].split("'")[0]
    assert page.count("<script") == 1
    assert f'<script nonce="{nonce}"' in page
    assert "default-src 'none'" in policy
    assert "unsafe-eval" not in policy
    assert "'unsafe-inline'" not in policy.split("script-src")[1]
    assert "<meta http-equiv" not in page  # that of the report would stop the script
    assert (headers["cache-control"], headers["x-content-type-options"]) == ("no-store", "nosniff")
    again = ask(served, "/")[1]["content-security-policy"]
    assert again != policy  # a nonce serves once


@pytest.mark.parametrize(
    "host", ["evil.example", "evil.example:80", "127.0.0.1", "127.0.0.1:1", "0.0.0.0", "[::1]", ""]
)
@pytest.mark.parametrize("path", ["/", "/version?after=x", "/runs.csv"])
def test_another_name_for_this_machine_gets_nothing(served: Server, host: str, path: str) -> None:
    status, _, text = ask(served, path, Host=host)
    assert status == 403
    assert text == "this server answers to 127.0.0.1 and localhost alone\n"


def test_localhost_is_this_machine(served: Server) -> None:
    assert ask(served, "/runs.csv", Host=f"localhost:{served.server_port}")[0] == 200


def test_results_are_served(served: Server) -> None:
    assert ask(served, "/runs.csv")[2] == "run\n1\n"
    status, headers, text = ask(served, "/figures/residuals.svg")
    assert (status, headers["content-type"], text) == (200, "image/svg+xml", "<svg/>")
    assert ask(served, "/runs.csv", "HEAD")[::2] == (200, "")


ASKED = [
    "/../secret.csv",
    "/%2e%2e/secret.csv",
    "/..%2fsecret.csv",
    "/figures/../../secret.csv",
    "/figures/%2e%2e/%2e%2e/secret.csv",
    "/..%5csecret.csv",
    "/%2e%2e%5csecret.csv",
    "//secret.csv/../../secret.csv",
    "/./runs.csv",
    "/C:/secret.csv",
    "/secret%00.csv",
    "/figures",
    "/figures/",
    "/link.csv",
    "/folder/secret.csv",
    "/notes.txt",
    "/favicon.ico",
    "/" + "a" * 5000,
]


@pytest.mark.parametrize("path", ASKED)
def test_nothing_outside_the_results_is_served(served: Server, path: str) -> None:
    outside = served.folder.parent
    (served.folder / "link.csv").symlink_to(outside / "secret.csv")
    (served.folder / "folder").symlink_to(outside, target_is_directory=True)
    assert inside(served.folder, path) is None
    status, _, text = ask(served, path)
    assert (status, text) == (404, "there is no such file among the results\n")


def test_an_absolute_path_of_a_file_is_not_served(served: Server) -> None:
    secret = served.folder.parent / "secret.csv"
    assert inside(served.folder, "/" + os.fspath(secret)) is None
    assert ask(served, "/" + os.fspath(secret))[0] == 404
    assert ask(served, "file://" + os.fspath(secret))[0] == 404


@pytest.mark.parametrize("method", ["POST", "PUT", "DELETE", "OPTIONS", "TRACE"])
def test_it_only_reads(served: Server, method: str) -> None:
    assert ask(served, "/", method)[0] == 501


def test_a_reader_waits_for_the_next_version(served: Server) -> None:
    now = served.live.shown.version
    assert ask(served, "/version?after=other")[2] == now
    threading.Timer(0.4, lambda: served.live.bad(["gone"], "14:31:00")).start()
    began = time.monotonic()
    told = ask(served, f"/version?after={now}")[2]
    assert told == served.live.shown.version != now
    assert 0.3 < time.monotonic() - began < 8


def test_readers_are_let_go_at_the_end(tmp_path: Path) -> None:
    live, answers = Live("bench"), []
    with serving(live, tmp_path) as server:
        port, version = server.server_port, live.shown.version
        waiting = threading.Thread(target=lambda: answers.append(ask(server, f"/version?after={version}")[2]))
        waiting.start()
        time.sleep(0.3)
        began = time.monotonic()
    waiting.join(timeout=10)
    assert time.monotonic() - began < 5
    assert answers == [version]
    with socket.socket() as free:  # the port is given back
        assert free.connect_ex(("127.0.0.1", port)) != 0


def test_a_request_that_is_broken_off_leaves_no_word(
    served: Server, capfd: pytest.CaptureFixture[str]
) -> None:
    with socket.create_connection(("127.0.0.1", served.server_port)) as half:
        half.sendall(b"GET / HTTP/1.1\r\nHost: ")
    with socket.create_connection(("127.0.0.1", served.server_port)) as wild:
        wild.sendall(b"\x16\x03\x01 no http\r\n\r\n")
        wild.recv(100)
    assert ask(served, "/runs.csv")[0] == 200
    assert capfd.readouterr() == ("", "")


def test_before_there_is_a_report_the_page_says_so() -> None:
    page, _ = page_of(Shown("a-1", None, "", ("survey.toml: gone",), "14:31:00"), "bench", "n")
    assert "There is no report yet" in page
    assert "Since 14:31:00 the survey cannot be reduced.</strong>\n<ul" in page
    assert "Follows bench." in page


def test_what_comes_from_files_is_escaped() -> None:
    told = "readings.csv row 3, T2 [mm]: '<script>alert(\"1\")</script>' is not a number"
    page, _ = page_of(Shown("a-2", REPORT, "14:30:12", (told,), "14:31:00"), "<b>&\"'", "n")
    assert "&lt;script&gt;alert(&quot;1&quot;)&lt;/script&gt;" in page
    assert page.count("<script") == 1
    assert "Follows &lt;b&gt;&amp;&quot;&#x27;; this report is of 14:30:12." in page
    assert "The report below is the last good one, of 14:30:12." in page
    assert page.index("watch-note") < page.index("<main>The report</main>")


def test_the_note_goes_with_the_next_good_report_and_stays_until_then() -> None:
    live = Live("bench")
    first = live.good(REPORT, "14:30:12")
    bad = live.bad(["one"], "14:31:00")
    assert live.shown.report == REPORT
    assert live.bad(["one"], "14:31:30") == bad  # the same once more is nothing new
    assert live.shown.since == "14:31:00"
    assert live.bad(["two"], "14:32:00") != bad
    last = live.good(REPORT, "14:33:00")
    assert live.shown.problems == ()
    assert len({first, bad, last}) == 3
    assert "watch-note" not in page_of(live.shown, "bench", "n")[0].split("<script")[0]
