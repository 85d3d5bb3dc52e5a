"""Starting, joining, stopping: servers in this process, and the command in processes of its own."""

import errno
import http.client
import json
import os
import re
import signal
import socket
import subprocess
import sys
import threading
from http.cookies import SimpleCookie
from pathlib import Path
from urllib.request import url2pathname

import dash
import pytest

from app import folder as folder_module
from app.folder import Folder, FolderInUse, read_notice
from app.main import main
from app.places import ASSETS, SAMPLE_SWEEPS
from app.serving import AddressRefused, listen, serve
from core.errors import StoreFailed

TOP = Path(__file__).parents[2]


def small_app(store, door, jobs):
    app = dash.Dash("small", csrf_token_name=door.csrf_cookie, enable_mcp=False)
    app.layout = dash.html.Div("the workbench")
    app.server.add_url_rule("/bug", "bug", lambda: {}["missing"])
    return app


@pytest.fixture
def running(tmp_path):
    with serve(tmp_path, make_app=small_app) as running:
        yield running


def ask(url, path="/", cookie=""):
    """Status, text and cookies of one request, as a browser at this address would send it."""
    connection = http.client.HTTPConnection(url.removeprefix("http://"), timeout=60)
    try:
        connection.request("GET", path, headers={"Cookie": cookie} if cookie else {})
        answer = connection.getresponse()
        cookies = SimpleCookie()
        for value in answer.headers.get_all("Set-Cookie", []):
            cookies.load(value)
        text = answer.read().decode()
        return answer.status, text, "; ".join(f"{name}={morsel.value}" for name, morsel in cookies.items())
    finally:
        connection.close()


def enter(link):
    """The cookies that a link gives, after checking that it lets in."""
    url, _, path = link.partition("/enter")
    status, _, cookie = ask(url, "/enter" + path)
    assert status == 200
    return cookie


def link_in(page):
    return re.search(r'href="([^"]+)"', Path(page).read_text(encoding="utf-8"))[1]


# In this process


def test_a_server_answers_with_a_key_and_refuses_without(running):
    assert ask(running.url)[0] == 403
    cookie = enter(running.entry_url)
    status, text, _ = ask(running.url, cookie=cookie)
    assert status == 200 and "_dash-config" in text
    assert ask(running.url)[0] == 403


def test_a_bug_in_a_route_is_a_sentence_and_the_server_goes_on(running, caplog):
    cookie = enter(running.entry_url)
    status, text, _ = ask(running.url, "/bug", cookie)
    assert status == 500 and "went wrong" in json.loads(text)["sentence"] and "KeyError" not in text
    assert "KeyError" in caplog.text
    assert ask(running.url, cookie=cookie)[0] == 200


def test_an_open_page_goes_on_after_a_restart_at_the_same_port(tmp_path):
    with serve(tmp_path, make_app=small_app) as first:
        old_link = first.entry_url
        cookie = enter(first.entry_url)
    with serve(tmp_path, first.door.port, make_app=small_app) as second:
        assert second.url == first.url
        assert ask(second.url, cookie=cookie)[0] == 200
        assert ask(second.url, old_link.removeprefix(second.url))[0] == 403  # a key never used is void all the same


def test_closing_lets_go_of_port_folder_threads_and_pages(tmp_path):
    before = set(threading.enumerate())
    running = serve(tmp_path, make_app=small_app)
    page = running.write_page()
    enter(running.entry_url)
    running.close()
    running.close()
    assert not page.parent.exists()
    assert read_notice(tmp_path) is None
    with pytest.raises(ConnectionRefusedError):
        ask(running.url)
    assert not {thread for thread in set(threading.enumerate()) - before if "sweepbench" in thread.name}
    serve(tmp_path, make_app=small_app).close()


def test_a_start_that_fails_halfway_lets_the_folder_go(tmp_path):
    def broken_app(store, door, jobs):
        raise StoreFailed("no app today")

    with pytest.raises(StoreFailed, match="no app today"):
        serve(tmp_path, make_app=broken_app)
    serve(tmp_path, make_app=small_app).close()


def test_one_folder_has_one_server(running, tmp_path):
    with pytest.raises(FolderInUse) as refusal:
        serve(tmp_path, make_app=small_app)
    assert str(tmp_path) in str(refusal.value) and "--keep" in str(refusal.value)
    assert refusal.value.notice.address == running.url


def test_what_is_kept_beside_the_work_is_its_owner_s_alone(running, tmp_path):
    for name in ("running.json", "session.secret", "running.lock"):
        assert (tmp_path / name).is_file()
        if os.name == "posix":
            assert (tmp_path / name).stat().st_mode & 0o077 == 0


@pytest.mark.skipif(os.name != "posix", reason="rights of files as POSIX has them")
def test_a_secret_that_others_could_read_is_replaced(tmp_path):
    held = Folder(tmp_path)
    first = held.secret()
    assert held.secret() == first
    (tmp_path / "session.secret").chmod(0o644)
    assert held.secret() != first
    assert (tmp_path / "session.secret").stat().st_mode & 0o077 == 0
    held.release()


def test_a_full_disk_is_told_in_a_sentence_and_leaves_nothing_half_written(tmp_path, monkeypatch):
    held = Folder(tmp_path)
    before = sorted(tmp_path.iterdir())

    def full(*_):
        raise OSError(errno.ENOSPC, os.strerror(errno.ENOSPC))

    monkeypatch.setattr(folder_module.os, "replace", full)
    with pytest.raises(StoreFailed, match="Free some space"):
        held.secret()
    assert sorted(tmp_path.iterdir()) == before
    held.release()


def test_a_taken_port_gives_way_to_the_next_free_one():
    (first,) = listen(0)
    taken = first.getsockname()[1]
    (second,) = listen(taken)
    (third,) = listen(taken)
    with first, second, third:
        ports = [taken, second.getsockname()[1], third.getsockname()[1]]
        assert ports == sorted(set(ports))
        assert {bound.getsockname()[0] for bound in (first, second, third)} == {"127.0.0.1"}


@pytest.mark.parametrize("address", ["0.0.0.0", "::", "192.0.2.1", "no such name.invalid"])
def test_a_network_address_must_be_one_of_this_machine(address):
    """192.0.2.0/24 is kept for documentation (RFC 5737): no machine has it."""
    with pytest.raises(AddressRefused):
        listen(0, address)


@pytest.mark.skipif(not sys.platform.startswith("linux"), reason="only Linux answers at all of 127.0.0.0/8")
def test_other_machines_need_a_key_too(tmp_path):
    with serve(tmp_path, network_address="127.0.0.2", make_app=small_app) as running:
        port = running.door.port
        assert running.network_url == f"http://127.0.0.2:{port}"
        assert ask(running.network_url)[0] == 403
        cookie = enter(link_in(running.write_page(for_network=True)))
        assert ask(running.network_url, cookie=cookie)[0] == 200
        session = running.door.session
    with serve(tmp_path, port, make_app=small_app) as running:
        assert running.door.session != session  # what could be overheard does not outlive the run
        with pytest.raises(ConnectionRefusedError):
            ask(f"http://127.0.0.2:{port}")


# The command


class Command:
    """The console command in a process of its own."""

    def __init__(self, folder, *options):
        self.process = subprocess.Popen(
            [sys.executable, "-m", "app", "--keep", str(folder), "--no-browser", *options],
            cwd=TOP,
            stdout=subprocess.PIPE,
            stderr=subprocess.PIPE,
            text=True,
            encoding="utf-8",
            env=os.environ | {"PYTHONUTF8": "1"},
        )
        self.said = ""

    def until(self, words):
        """Read what it says up to some words."""
        while words not in self.said:
            line = self.process.stdout.readline()
            assert line, f"it ended: {self.said} {self.process.stderr.read()}"
            self.said += line
        return self.said

    @property
    def url(self):
        return re.search(r"http://[\w.:]+\d", self.said)[0]

    @property
    def page(self):
        return re.search(r"Open this file in your browser: (.+)", self.said)[1]

    def end(self, number=None):
        if number is not None:
            self.process.send_signal(number)
        rest, errors = self.process.communicate(timeout=60)
        self.said += rest
        return self.process.returncode, errors

    def __enter__(self):
        return self

    def __exit__(self, *_):
        self.process.kill()
        self.process.communicate()


def test_the_command_serves_is_joined_and_stops_with_a_sentence(tmp_path):
    with Command(tmp_path, "--port", "0") as first:
        first.until("Press Ctrl+C")
        page = first.page
        link = link_in(page)
        assert link.startswith(first.url) and link.partition("key=")[2] not in first.said
        cookie = enter(link)
        assert ask(first.url, cookie=cookie)[0] == 200
        assert not Path(page).exists()

        with Command(tmp_path) as second:
            status, errors = second.end()
            assert (status, errors) == (0, "")
            assert f"already running at {first.url}" in second.said
            assert ask(first.url, cookie=enter(link_in(second.page)))[0] == 200

        status, errors = first.end(signal.SIGTERM)
        assert (status, errors) == (0, "")
        assert "has stopped" in first.said
        assert not Path(page).parent.exists() and not (tmp_path / "running.json").exists()


@pytest.mark.skipif(os.name != "posix", reason="needs kill -9")
def test_after_kill_9_the_next_start_serves_again_and_the_open_page_goes_on(tmp_path):
    with Command(tmp_path, "--port", "0") as first:
        first.until("Press Ctrl+C")
        cookie = enter(link_in(first.page))
        left_over = Path(first.page).parent
        first.end(signal.SIGKILL)
        assert left_over.exists() and (tmp_path / "running.json").exists()
    with Command(tmp_path, "--port", first.url.rpartition(":")[2]) as second:
        assert "ended abruptly" in second.until("Press Ctrl+C")
        assert second.url == first.url
        assert ask(second.url, cookie=cookie)[0] == 200
        assert not left_over.exists()
        assert second.end(signal.SIGINT)[0] == 0


def test_the_command_says_which_port_it_took_instead(tmp_path):
    with socket.create_server(("127.0.0.1", 0)) as taken:
        port = taken.getsockname()[1]
        with Command(tmp_path, "--port", str(port)) as command:
            assert f"Port {port} is taken" in command.until("Press Ctrl+C")
            assert command.end(signal.SIGTERM)[0] == 0


def test_a_folder_that_cannot_be_used_is_told_and_ends_with_2(tmp_path, capsys):
    (tmp_path / "file").write_text("not a folder")
    assert main(["--keep", str(tmp_path / "file" / "work"), "--no-browser"]) == 2
    told = capsys.readouterr()
    assert told.out == "" and "--keep" in told.err and "Traceback" not in told.err
    assert f"{tmp_path / 'file'} is a file and not a folder." in told.err and "space" not in told.err


@pytest.mark.parametrize(
    ("code", "says"),
    [
        (errno.EACCES, "you may not write in {top}. Mend its rights"),
        (errno.EROFS, "you may not write in {top}. Mend its rights"),
        (errno.ENOSPC, "the disk is full. Free some space"),
        (errno.ENAMETOOLONG, "no folder of that name"),
        (errno.EIO, "the system says “"),
    ],
)
def test_a_folder_that_cannot_be_made_is_told_with_the_reason_and_its_remedy(tmp_path, capsys, monkeypatch, code, says):
    def refused(*_args, **_options):
        raise OSError(code, os.strerror(code))

    with monkeypatch.context() as patch:
        patch.setattr(Path, "mkdir", refused)
        assert main(["--keep", str(tmp_path / "new" / "work"), "--no-browser"]) == 2
    told = capsys.readouterr().err
    assert says.format(top=tmp_path) in told and told.rstrip().endswith("--keep.")


@pytest.mark.parametrize("folder", ["", "  "])
def test_a_folder_without_a_name_is_refused_and_never_the_current_one(folder, tmp_path, capsys, monkeypatch):
    monkeypatch.chdir(tmp_path)
    with pytest.raises(SystemExit) as end:
        main(["--keep", folder, "--no-browser"])
    assert end.value.code == 2
    assert "no folder is named" in capsys.readouterr().err
    assert list(tmp_path.iterdir()) == []


def test_an_unusable_network_address_is_told_and_ends_with_2(tmp_path, capsys):
    assert main(["--keep", str(tmp_path), "--no-browser", "--serve-network", "0.0.0.0"]) == 2
    assert "every address" in capsys.readouterr().err


def test_a_folder_in_use_on_another_machine_is_refused_not_joined(running, tmp_path, capsys):
    notice = json.loads((tmp_path / "running.json").read_text(encoding="utf-8"))
    (tmp_path / "running.json").write_text(json.dumps(notice | {"machine": "the-other-one"}), encoding="utf-8")
    assert main(["--keep", str(tmp_path), "--no-browser"]) == 2
    assert "the-other-one" in capsys.readouterr().err


def test_the_browser_is_started_with_a_path_that_tells_no_key(running, tmp_path, monkeypatch, capsys):
    opened = []
    monkeypatch.setenv("DISPLAY", ":0")
    monkeypatch.setattr("app.main.webbrowser.open", lambda url: opened.append(url) or True)
    assert main(["--keep", str(tmp_path)]) == 0
    (page,) = opened
    assert page.startswith("file:")
    link = link_in(url2pathname(page.removeprefix("file:")))
    key = link.partition("key=")[2]
    assert key and key not in page and key not in "".join(capsys.readouterr())
    assert ask(running.url, cookie=enter(link))[0] == 200


def test_the_version_is_told(capsys):
    with pytest.raises(SystemExit) as end:
        main(["--version"])
    assert end.value.code == 0
    assert re.match(r"Sweepbench \d", capsys.readouterr().out)


@pytest.mark.parametrize("port", ["-1", "65536", "door", "", "8417.5", "²"])
def test_a_port_that_is_none_is_refused(port, capsys):
    with pytest.raises(SystemExit) as end:
        main(["--port", port])
    assert end.value.code == 2
    told = capsys.readouterr().err
    assert f"argument --port: “{port}” is not a port. Give a whole number from 1 to 65535" in told


LOGGED = """
import pathlib, sys
from app.answers import sentence_for
from app.main import _log_to

_log_to(pathlib.Path(sys.argv[1]))
try:
    {}["missing"]
except KeyError as error:
    print(sentence_for(error))
"""


def test_a_traceback_goes_to_the_log_file_and_a_sentence_to_the_console(tmp_path):
    log = tmp_path / "sweepbench.log"
    told = subprocess.run([sys.executable, "-c", LOGGED, log], cwd=TOP, capture_output=True, text=True, check=True)
    assert "went wrong" in told.stdout
    assert told.stderr == f"An unexpected error. The details are in {log}.\n"
    assert "KeyError: 'missing'" in log.read_text(encoding="utf-8")


def test_what_ships_with_the_program_is_found():
    assert (ASSETS.is_dir(), SAMPLE_SWEEPS.is_dir()) == (True, True)
