"""What browser tests share: Debian's chromium without a screen, the page server, waiting, TAP lines."""
import os
import subprocess
import threading
import time

from selenium import webdriver
from selenium.webdriver.chrome.options import Options
from selenium.webdriver.chrome.service import Service

BUILD = os.environ.get("HUSHWATCH_BUILD", "build")
FLAGS = ["--headless", "--no-sandbox", "--disable-gpu", "--disable-background-networking", "--disable-component-update",
         "--disable-sync", "--no-first-run", "--disable-dev-shm-usage", "--hide-scrollbars"]


class Tap:
    def __init__(self):
        self.count = self.failed = 0

    def check(self, good, name, detail=""):
        self.count += 1
        self.failed += not good
        line = "%s %d - %s" % ("ok" if good else "not ok", self.count, name)
        print(line if good else line + " (" + str(detail)[:400].replace("\n", " ") + ")", flush=True)
        return good

    def end(self):
        print("1..%d" % self.count, flush=True)
        return 1 if self.failed or not self.count else 0


class PageServer:
    """tests/browser/board_server.c with its words."""

    def __init__(self):
        self.process = subprocess.Popen([os.path.join(BUILD, "tests/browser/board_server")], stdin=subprocess.PIPE,
                                        stdout=subprocess.PIPE, text=True, bufsize=1)
        self.base = "http://127.0.0.1:%d" % int(self.process.stdout.readline().split()[1])
        self.lines = []
        threading.Thread(target=self._read, daemon=True).start()

    def _read(self):
        for line in self.process.stdout:
            self.lines.append(line.rstrip("\n"))

    def say(self, *words):
        for word in words:
            self.process.stdin.write(word + "\n")

    def notes(self):
        return [line[5:] for line in self.lines if line.startswith("note ")]

    def end(self):
        self.process.kill()
        self.process.wait()


class Browser:
    """One chromium with one page."""

    def __init__(self, width=1920, height=1080):
        options = Options()
        options.binary_location = "/usr/bin/chromium"
        for flag in FLAGS + ["--window-size=%d,%d" % (width, height)]:
            options.add_argument(flag)
        options.set_capability("goog:loggingPrefs", {"browser": "ALL"})
        self.driver = webdriver.Chrome(service=Service("/usr/bin/chromedriver"), options=options)
        self.size(width, height)

    def size(self, width, height):
        self.driver.execute_cdp_cmd("Emulation.setDeviceMetricsOverride",
                                    {"width": width, "height": height, "deviceScaleFactor": 1, "mobile": False})

    def open(self, url):
        self.driver.get(url)

    def script(self, text, *arguments):
        return self.driver.execute_script(text, *arguments)

    def text(self, selector):
        return self.script("const n = document.querySelector(arguments[0]); return n ? n.textContent : null", selector)

    def shown(self, selector):
        """The text that a person can see: laid out, not hidden."""
        return self.script("const n = document.querySelector(arguments[0]); return n && n.offsetParent !== null ? n.innerText : null", selector)

    def until(self, text, seconds=5.0):
        """Waits until the script returns something true; returns (what, seconds it took)."""
        start = time.monotonic()
        while True:
            result = self.script(text)
            took = time.monotonic() - start
            if result or took > seconds:
                return result, took
            time.sleep(0.02)

    def picture(self, name):
        folder = os.path.join(BUILD, "pictures")
        os.makedirs(folder, exist_ok=True)
        self.driver.save_screenshot(os.path.join(folder, name + ".png"))

    def complaints(self):
        return [entry["message"] for entry in self.driver.get_log("browser")]

    def end(self):
        self.driver.quit()
