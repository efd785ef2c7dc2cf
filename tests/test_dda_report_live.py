"""The page of a run: what it answers, and what a browser makes of it."""

import http.client
import json
import os
import re
import shutil
import signal
import socket
import subprocess
import sys
import threading
from contextlib import contextmanager
from urllib.request import urlopen

import pytest

from dda.cli import main
from dda.errors import InputError
from dda.report.live import HOST, MOST_CURVES, LiveServer
from dda.study.lock import Lock
from tests.runs import answer, begin, finished, grid, section

NASTY = "<script>document.title = 'taken'</script> & <b>gold</b>"
REASON = "out of memory <img src=x onerror=\"document.title = 'taken'\"> at 500 nm"


@contextmanager
def _served(folder):
    server = LiveServer(folder)
    thread = threading.Thread(target=server.serve_forever, kwargs={"poll_interval": 0.02})
    thread.start()
    try:
        yield server
    finally:
        server.shutdown()
        server.server_close()
        thread.join()


@pytest.fixture
def run(tmp_path):
    """Two sets of three points: one is good, one failed, the others wait; open to be written."""
    entries = grid()
    ledger = begin(tmp_path, entries, {"name": NASTY, "particle": {"shape": "cube"}})
    ledger.record(entries[0].identity, answer(entries[0]))
    ledger.record(entries[1].identity, answer(entries[1], "failed", REASON))
    yield tmp_path, ledger, entries
    ledger.close()


# --- what the server answers ---------------------------------------------------------------------


def _ask(server, path, host=None, method="GET"):
    connection = http.client.HTTPConnection(HOST, server.server_port, timeout=10)
    connection.request(method, path, headers={"Host": host or f"{HOST}:{server.server_port}"})
    answered = connection.getresponse()
    content = answered.read().decode()
    connection.close()
    return answered, content


def test_the_state_counts_and_changes_when_a_point_is_added(run):
    folder, ledger, entries = run
    with _served(folder) as server:
        before = json.loads(_ask(server, "/state")[1])
        assert (before["done"], before["total"]) == (2, 6)
        assert before["counts"]["failed"] == 1
        assert before["doubts"][0]["reason"] == REASON
        assert [s["name"] for s in before["sets"]] == ["particle.edge = 40", "particle.edge = 50"]
        assert json.loads(_ask(server, "/state")[1])["version"] == before["version"]
        ledger.record(entries[5].identity, answer(entries[5]))
        after = json.loads(_ask(server, "/state")[1])
        assert after["done"] == 3
        assert [s["done"] for s in after["sets"]] == [2, 1]
        assert after["version"] != before["version"]


def test_the_curves_are_those_of_the_sets_asked_for(run):
    folder, ledger, entries = run
    ledger.record(entries[4].identity, answer(entries[4], "stalled", "no end"))
    with _served(folder) as server:
        found = json.loads(_ask(server, "/curves?set=1&set=0&set=7&set=-1&set=x")[1])["curves"]
        many = "&".join(["set=0"] * (MOST_CURVES + 3))
        assert len(json.loads(_ask(server, f"/curves?{many}")[1])["curves"]) == MOST_CURVES
    assert [curve["set"] for curve in found] == [1, 0]
    (point,) = found[0]["points"]
    assert point["kind"] == "not converged"
    assert point["ext"] == [section(entries[4]), 0.02 * section(entries[4])]
    assert [p["ext"][0] for p in found[1]["points"]] == [section(entries[0]), None]


@pytest.mark.parametrize("host", ["evil.example", "evil.example:80", f"{HOST}:1", "[::1]:80", ""])
def test_a_foreign_name_is_refused(run, host):
    with _served(run[0]) as server:
        for path in ("/", "/state", "/curves?set=0", "/watch.js"):
            answered, content = _ask(server, path, host or " ")
            assert answered.status == 403
            assert "gold" not in content
        assert _ask(server, "/", f"localhost:{server.server_port}")[0].status == 200


def test_only_the_page_is_served_and_only_to_this_machine(run):
    with _served(run[0]) as server:
        assert server.server_address[0] == "127.0.0.1"
        for path in (
            "/ledger.sqlite",
            "/../live.py",
            "/%2e%2e/live.py",
            "/live.py",
            "//etc/passwd",
        ):
            assert _ask(server, path)[0].status == 404
        assert _ask(server, "/", method="POST")[0].status == 501
        assert _ask(server, "/", method="HEAD")[1] == ""


def test_the_page_needs_nothing_from_elsewhere_and_may_load_nothing(run):
    with _served(run[0]) as server:
        answered, page = _ask(server, "/")
        texts = page + "".join(_ask(server, f"/{n}")[1] for n in re.findall(r'src="(\S+js)"', page))
        texts += _ask(server, "/watch.css")[1]
    policy = answered.headers["Content-Security-Policy"]
    assert "default-src 'none'" in policy
    assert "unsafe" not in policy
    addresses = set(re.findall(r"https?://[^\s\"')]+", texts))
    assert addresses == {"http://www.w3.org/2000/svg"}  # the name of SVG, not a place
    assert "&lt;script&gt;" in page
    assert "innerHTML" not in texts


def test_a_run_that_is_taken_away_is_told(run):
    folder, ledger, _ = run
    with _served(folder) as server:
        ledger.close()
        for path in folder.glob("ledger.sqlite*"):
            path.unlink()
        assert "no run of a study" in json.loads(_ask(server, "/state")[1])["error"]
        assert "no run of a study" in json.loads(_ask(server, "/curves?set=0")[1])["error"]


def test_mistakes_are_a_sentence(run, tmp_path_factory, capsys):
    folder = str(run[0])
    with socket.create_server((HOST, 0)) as other:
        port = other.getsockname()[1]
        assert main(["watch", folder, "--port", str(port)]) == 2
    assert f"port {port} cannot be had" in capsys.readouterr().err
    with pytest.raises(InputError, match="from 0 to 65535"):
        LiveServer(run[0], 70000)
    with pytest.raises(InputError, match="no run of a study"):
        LiveServer(tmp_path_factory.mktemp("empty"))


@pytest.mark.skipif(os.name == "nt", reason="this system has no Ctrl-C to be sent to a process")
def test_ctrl_c_ends_it_quietly_and_leaves_the_run_alone(run):
    folder, _, _ = run
    with Lock(folder):
        before = (folder / "ledger.sqlite").read_bytes()
        command = [sys.executable, "-m", "dda.cli", "watch", str(folder)]
        process = subprocess.Popen(
            command, stdout=subprocess.PIPE, stderr=subprocess.PIPE, text=True
        )
        try:
            line = process.stdout.readline()
            url = re.search(r"http://127\.0\.0\.1:\d+/", line)[0]
            with urlopen(url, timeout=10) as page:
                assert page.status == 200
        finally:
            process.send_signal(signal.SIGINT)
            _, complaints = process.communicate(timeout=20)
        assert process.returncode == 0
        assert complaints == ""
        assert (folder / "ledger.sqlite").read_bytes() == before


# --- what a browser makes of it ------------------------------------------------------------------


@pytest.fixture(scope="module")
def browser(tmp_path_factory):
    """A headless Chromium."""
    chromium = shutil.which("chromium") or shutil.which("chromium-browser")
    driver = shutil.which("chromedriver")
    if chromium is None or driver is None:
        pytest.skip("chromium and chromedriver are not installed")
    webdriver = pytest.importorskip("selenium.webdriver", reason="selenium is not installed")
    from selenium.webdriver.chrome.service import Service

    options = webdriver.ChromeOptions()
    options.binary_location = chromium
    for flag in (
        "--headless=new",
        "--no-sandbox",
        "--disable-gpu",
        "--disable-dev-shm-usage",
        "--disable-quic",
        "--no-first-run",
        "--disable-background-networking",
        "--disable-component-update",
        "--disable-sync",
        f"--user-data-dir={tmp_path_factory.mktemp('chromium')}",
    ):
        options.add_argument(flag)
    options.set_capability("goog:loggingPrefs", {"browser": "ALL"})
    found = webdriver.Chrome(options=options, service=Service(driver))
    yield found
    found.quit()


@pytest.fixture
def look(browser):
    """Open a page, and check at the end that nothing went wrong in it."""

    def open_page(server, width=1200, scheme="light"):
        size = {"width": width, "height": 900, "deviceScaleFactor": 1, "mobile": False}
        browser.execute_cdp_cmd("Emulation.setDeviceMetricsOverride", size)
        wish = [{"name": "prefers-color-scheme", "value": scheme}]
        browser.execute_cdp_cmd("Emulation.setEmulatedMedia", {"features": wish})
        browser.get(server.url)
        # a page just navigated to may not have its scripts yet
        loaded = "typeof state !== 'undefined' && state !== null"
        _until(browser, f"return {loaded} && (drawn.length > 0 || state.done === 0)")
        return browser

    yield open_page
    wrong = [e for e in browser.get_log("browser") if "ERR_CONNECTION_REFUSED" not in e["message"]]
    browser.get("about:blank")
    assert wrong == []


def _until(browser, script, seconds=15):
    """Wait until a script says yes; the page asks every second or two."""
    from selenium.webdriver.support.ui import WebDriverWait

    WebDriverWait(browser, seconds, 0.05).until(lambda page: page.execute_script(script))


def _count(page, kind):
    return int(page.find_element("css selector", f'[data-kind="{kind}"] b').text)


def test_the_page_shows_the_counts_and_follows_the_run(run, look):
    folder, ledger, entries = run
    with Lock(folder), _served(folder) as server:
        page = look(server)
        assert page.title == f"{NASTY} · 33 %"
        assert page.find_element("id", "title").text == NASTY
        assert (_count(page, "converged"), _count(page, "failed"), _count(page, "waiting")) == (
            1,
            1,
            4,
        )
        assert "2 of 6 points done; about 8 s left" in page.find_element("id", "headline").text
        assert f"process {os.getpid()} on" in page.find_element("id", "holder").text
        ledger.record(entries[2].identity, answer(entries[2]))
        _until(page, "return document.title.endsWith('50 %')")
        assert _count(page, "converged") == 2
        assert len(page.execute_script("return drawn[0].points")) == 3


def test_texts_of_the_run_are_texts_and_a_failure_has_its_reason(run, look):
    with _served(run[0]) as server:
        page = look(server)
        (row,) = page.find_elements("css selector", "#doubts tbody tr")
        assert row.text.endswith(REASON)
        assert "particle.edge = 40, 520 nm" in row.text
        assert page.find_elements("css selector", "main img, main script, main b[onerror]") == []
        outside = page.execute_script(
            "return performance.getEntriesByType('resource').map(e => e.name)"
            ".filter(name => !name.startsWith(location.origin))"
        )
        assert outside == []


def test_it_says_who_runs_it_or_how_to_go_on_or_that_it_has_ended(run, look):
    folder, ledger, entries = run
    with _served(folder) as server:
        page = look(server)
        news = page.find_element("id", "news")
        assert news.text == f"Nobody is running it; to go on: dda run {folder}"
        for entry in entries[1:]:
            ledger.record(entry.identity, answer(entry))
        _until(page, "return document.title.endsWith('100 %')")
        assert "The run has ended" in news.text
    _until(page, "return document.getElementById('news').textContent.includes('server')")
    assert "the run is not affected" in news.text
    assert _count(page, "converged") == 6


def test_values_are_read_with_the_pointer_and_with_the_keyboard(run, look):
    from selenium.webdriver import ActionChains, Keys

    folder, ledger, entries = run
    for entry in entries[2:]:
        ledger.record(entry.identity, answer(entry))
    with _served(folder) as server:
        page = look(server)
        _until(page, "return drawn.length === 2 && drawn[1].points.length === 3")
        plot, note = page.find_element("id", "plot"), page.find_element("id", "reading")
        assert not note.is_displayed()
        x, y = page.execute_script("return drawn[1].places[1]")
        area = plot.rect
        move = ActionChains(page, duration=0)
        move.move_to_element_with_offset(
            plot, round(x - area["width"] / 2), round(y - area["height"] / 2)
        ).perform()
        # edge 50 at its peak: 3 x 50^2 nm^2, the error bar 2 % of it
        lines = note.text.splitlines()
        assert lines == ["particle.edge = 50", "520 nm", "extinction 7500 ± 150 nm²"]
        page.execute_script("read(null)")
        plot.send_keys(Keys.ARROW_RIGHT)
        assert "500 nm" in note.text
        plot.send_keys(Keys.ARROW_RIGHT)  # over the point that failed
        assert "540 nm" in note.text
        plot.send_keys(Keys.ARROW_DOWN)
        spoken = page.find_element("id", "spoken").get_attribute("textContent")
        assert spoken.startswith("particle.edge = 50, 540 nm, extinction")
        plot.send_keys(Keys.ESCAPE)
        assert not note.is_displayed()


def test_curves_are_chosen_by_set_and_by_cross_section(tmp_path, look):
    edges = tuple(float(edge) for edge in range(40, 60))
    finished(tmp_path, grid(edges))
    with _served(tmp_path) as server:
        page = look(server)
        assert page.execute_script("return drawn.map(line => line.name)") == [
            f"particle.edge = {edge}" for edge in (40, 44, 48, 51, 55, 59)
        ]
        page.find_element("id", "filter").send_keys("edge = 47")
        boxes = page.find_elements("css selector", "#sets input")
        shown = [n for n, box in enumerate(boxes) if box.is_displayed() and not box.is_selected()]
        assert shown == [7]
        boxes[7].click()
        _until(page, "return drawn.some(line => line.name.endsWith('= 47'))")
        assert len(page.execute_script("return drawn")) == MOST_CURVES
        page.find_element("css selector", "input[value=sca]").click()
        tops = page.execute_script(
            "return drawn.map(line => Math.max(...line.points.map(p => p.y)))"
        )
        assert max(tops) == pytest.approx(0.3 * 3 * 59**2)
        page.find_element("css selector", "input[value=all]").click()
        assert len(page.execute_script("return drawn")) == 3 * MOST_CURVES


def test_it_fits_a_narrow_window_and_a_dark_room(run, look):
    with _served(run[0]) as server:
        page = look(server, width=400)
        assert page.execute_script("return document.documentElement.scrollWidth") <= 400
        shades = {}
        for scheme in ("light", "dark"):
            page = look(server, scheme=scheme)
            text = page.execute_script("return getComputedStyle(document.body).backgroundColor")
            shades[scheme] = sum(int(n) for n in re.findall(r"\d+", text)[:3]) / 765
        assert shades["light"] > 0.9
        assert shades["dark"] < 0.15


def test_the_colours_of_curves_stand_off_the_page_in_both_schemes():
    from importlib.resources import files

    from dda.report.colours import lightness

    style = files("dda.report").joinpath("watch.css").read_text(encoding="utf-8")
    blocks = re.findall(r":root \{(.*?)\}", style, re.DOTALL)
    assert len(blocks) == 2
    for block in blocks:
        colours = dict(re.findall(r"--(\w+): (#\w{6})", block))
        page = _luminance(lightness(colours["page"]))
        for name in ("good", "coarse", "bad", *(f"c{n}" for n in range(MOST_CURVES))):
            other = _luminance(lightness(colours[name]))
            high, low = max(page, other) + 0.05, min(page, other) + 0.05
            assert high / low >= 3, name  # the contrast that graphics need (WCAG 2.1)


def _luminance(star):
    return ((star + 16) / 116) ** 3 if star > 8 else star / 903.3
