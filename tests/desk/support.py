"""What the desk's tests share: the program on a copy of the sample venue, requests, a browser."""

import http.client
import json
import os
import pathlib
import shutil
import signal
import subprocess
import sys
import tempfile
import time
import urllib.parse

SOURCE = pathlib.Path(__file__).resolve().parents[2]
PROGRAM = os.environ.get("RONDEL_PROGRAM", str(SOURCE / "build/dev/bin/rondel"))
QUAY = SOURCE / "datasets/quay"


def until(true, seconds=60, what="something that did not happen"):
    """Waits for `true()`; a test that waits longer has failed."""
    end = time.monotonic() + seconds
    while time.monotonic() < end:
        answer = true()
        if answer:
            return answer
        time.sleep(0.05)
    raise AssertionError(f"waited {seconds} s in vain for {what}")


def rondel(*words, check=True):
    done = subprocess.run([PROGRAM, *map(str, words)], capture_output=True, text=True)
    if check and done.returncode not in (0, 1):
        raise AssertionError(f"rondel {words}: {done.returncode}\n{done.stdout}{done.stderr}")
    return done


class Desk:
    """A running `rondel desk`, and requests to it as the page makes them."""

    def __init__(self, venue, port=0):
        self.venue = pathlib.Path(venue)
        self.process = subprocess.Popen(
            [PROGRAM, "desk", str(venue), "--no-open", "--port", str(port)],
            stdout=subprocess.PIPE, stderr=subprocess.DEVNULL, text=True)
        self.address = self.process.stdout.readline().strip()
        if not self.address:
            raise AssertionError("the desk did not open")
        parts = urllib.parse.urlsplit(self.address)
        self.port = parts.port
        self.token = urllib.parse.parse_qs(parts.query)["token"][0]
        self.cookie = f"rondel_{self.port}={self.token}"

    def request(self, method, path, body=None, headers=None, cookie=True):
        """(status, headers, bytes); headers given as None are left out."""
        connection = http.client.HTTPConnection("127.0.0.1", self.port, timeout=60)
        sent = {"Cookie": self.cookie} if cookie else {}
        sent.update(headers or {})
        if isinstance(body, (dict, list)):
            body = json.dumps(body)
            sent.setdefault("Content-Type", "application/json")
        try:
            connection.request(method, path, body=body, headers=sent)
            answer = connection.getresponse()
            return answer.status, dict(answer.getheaders()), answer.read()
        finally:
            connection.close()

    def get(self, path, **parameters):
        query = "?" + urllib.parse.urlencode(parameters) if parameters else ""
        status, _, body = self.request("GET", path + query)
        if status != 200:
            raise AssertionError(f"{path}: {status} {body[:300]}")
        return json.loads(body)

    def post(self, path, body=None, expect=(200, 202)):
        status, _, answer = self.request("POST", path, body if body is not None else {})
        if status not in expect:
            raise AssertionError(f"{path}: {status} {answer[:300]}")
        return json.loads(answer)

    def bench(self):
        return self.get("/api/bench")

    def step(self, name, seconds=300):
        """Runs a step to its end; returns its state."""
        self.post("/api/run", {"step": name})
        until(lambda: not self.bench()["running"], seconds, f"the end of {name}")
        return next(step for step in self.bench()["steps"] if step["name"] == name)

    def kill(self):
        self.process.send_signal(signal.SIGKILL)
        self.process.wait()

    def close(self):
        if self.process.poll() is None:
            self.process.send_signal(signal.SIGINT)
            try:
                self.process.wait(20)
            except subprocess.TimeoutExpired:
                self.kill()
        self.process.stdout.close()


class Folder:
    """A folder of its own for a test, gone afterwards."""

    def __enter__(self):
        self.path = pathlib.Path(tempfile.mkdtemp(prefix="desk-test-"))
        return self.path

    def __exit__(self, *_):
        shutil.rmtree(self.path, ignore_errors=True)


def quay_in(folder, name="quay"):
    venue = pathlib.Path(folder) / name
    shutil.copytree(QUAY, venue)
    return venue


def sheets_of(venue):
    """Name and bytes of everything that people wrote."""
    names = ["venue.yaml", "rig.yaml", "marks.csv", "swatches.csv", "strokes.csv", "tape.csv"]
    return {name: (venue / name).read_bytes() for name in names if (venue / name).exists()}


def browser(folder, width=1280, height=900, dark=False, extra=()):
    """A headless Chromium with a profile of its own and its console kept."""
    from selenium import webdriver
    from selenium.webdriver.chrome.options import Options
    from selenium.webdriver.chrome.service import Service

    options = Options()
    for word in ("--headless", "--no-sandbox", "--disable-gpu", "--disable-background-networking",
                 "--disable-component-update", "--disable-sync", "--no-first-run",
                 "--disable-dev-shm-usage", "--hide-scrollbars", "--force-device-scale-factor=1",
                 f"--window-size={width},{height}",
                 f"--user-data-dir={tempfile.mkdtemp(dir=folder, prefix='profile-')}", *extra):
        options.add_argument(word)
    downloads = pathlib.Path(folder) / "downloads"
    downloads.mkdir(exist_ok=True)
    options.add_experimental_option("prefs", {"download.default_directory": str(downloads)})
    options.set_capability("goog:loggingPrefs", {"browser": "ALL"})
    driver = webdriver.Chrome(service=Service("/usr/bin/chromedriver"), options=options)
    driver.set_script_timeout(120)
    driver.execute_cdp_cmd("Emulation.setEmulatedMedia", {"features": [
        {"name": "prefers-color-scheme", "value": "dark" if dark else "light"}]})
    return driver


def main(tests):
    """Runs functions named on the command line, or all; a failure is said with its trace."""
    import traceback
    wanted = sys.argv[1:]
    failed = []
    for test in tests:
        if wanted and test.__name__ not in wanted:
            continue
        started = time.monotonic()
        try:
            test()
            print(f"ok   {test.__name__} ({time.monotonic() - started:.1f} s)", flush=True)
        except Exception:  # every test is run
            traceback.print_exc()
            print(f"FAIL {test.__name__} ({time.monotonic() - started:.1f} s)", flush=True)
            failed.append(test.__name__)
    if failed:
        sys.exit(f"failed: {', '.join(failed)}")
