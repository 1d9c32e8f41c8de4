"""Runs the real daemon for a test: start, ask, note, kill."""
import json
import os
import re
import signal
import subprocess
import sys
import time
import urllib.error
import urllib.request

sys.path.insert(0, os.path.dirname(os.path.abspath(__file__)))
from watch import BUILD  # noqa: E402


class Daemon:
    def __init__(self, config, environment=None):
        self.config = config
        self.environment = dict(os.environ, **(environment or {}))
        self.process = None
        self.port = None

    def start(self, wait_s=10):
        self.log = open(self.config + ".log", "a+")
        self.process = subprocess.Popen([BUILD + "/hushwatchd", "--config", self.config], stdout=subprocess.PIPE,
                                        stderr=self.log, text=True, env=self.environment)
        self.port = None
        deadline = time.monotonic() + wait_s
        while self.port is None and time.monotonic() < deadline and self.process.poll() is None:
            line = self.process.stdout.readline()
            match = re.search(r"https?://\S+:(\d+)/", line)
            self.port = int(match.group(1)) if match else None
        if self.port is None:
            raise RuntimeError("the daemon did not start: " + self.errors())
        return self

    def errors(self):
        with open(self.config + ".log") as log:
            return log.read()[-3000:]

    def url(self, path="/"):
        return "http://127.0.0.1:%d%s" % (self.port, path)

    def state(self):
        with urllib.request.urlopen(self.url("/api/state"), timeout=5) as answer:
            return json.loads(answer.read())

    def note(self, **fields):
        """Enters a note as a page does; returns (HTTP status, answer)."""
        request = urllib.request.Request(self.url("/api/note"), data=json.dumps(fields).encode(), method="POST",
                                         headers={"Content-Type": "application/json"})
        try:
            with urllib.request.urlopen(request, timeout=5) as answer:
                return answer.status, json.loads(answer.read())
        except urllib.error.HTTPError as error:
            return error.code, json.loads(error.read() or b"{}")

    def wait_for(self, what, limit_s, step_s=0.1):
        """The first state for which what(state) is true, or None."""
        deadline = time.monotonic() + limit_s
        while time.monotonic() < deadline:
            state = self.state()
            if what(state):
                return state
            time.sleep(step_s)
        return None

    def advice(self, station, state=None):
        """The advice in force for a station, or None."""
        state = state or self.state()
        for advice in state["advice"]:
            if advice["station"] == station and advice["in_force"]:
                return advice
        return None

    def kill(self):
        self.process.send_signal(signal.SIGKILL)
        self.process.wait()
        self.process.stdout.close()

    def terminate(self):
        """Seconds until it was gone, and its exit code."""
        start = time.monotonic()
        self.process.send_signal(signal.SIGTERM)
        try:
            code = self.process.wait(timeout=20)
        except subprocess.TimeoutExpired:
            self.process.kill()
            code = self.process.wait()
        self.process.stdout.close()
        return time.monotonic() - start, code

    def __enter__(self):
        return self.start()

    def __exit__(self, *_):
        if self.process and self.process.poll() is None:
            self.kill()
        self.log.close()
