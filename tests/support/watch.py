"""What the scripted tests share: where the programs are, TAP lines, settings files, questions to a ledger."""
import json
import os
import sqlite3
import subprocess
import sys
import tempfile

BUILD = os.environ.get("HUSHWATCH_BUILD", os.path.abspath("build"))
SHARED = os.environ.get("HUSHWATCH_SHARED", os.path.abspath("../shared"))
LENGTH = os.environ.get("HUSHWATCH_LENGTH", "check")
ROOT = os.path.dirname(os.path.dirname(os.path.dirname(os.path.abspath(__file__))))
_results = []


def check(name, good, detail=""):
    """One TAP line; a detail is shown when it is not good."""
    _results.append(bool(good))
    if not good and detail:
        print("\n".join("# " + line for line in str(detail).splitlines()[-30:]))
    print("%s %d - %s" % ("ok" if good else "not ok", len(_results), name), flush=True)
    return bool(good)


def skip(name, why):
    _results.append(True)
    print("ok %d - %s # SKIP %s" % (len(_results), name, why), flush=True)


def figure(text):
    print("# figure " + text, flush=True)


def finish():
    print("1..%d" % len(_results))
    sys.exit(0 if all(_results) else 1)


def rerun(ledger, *arguments):
    return subprocess.run([BUILD + "/hushwatch", "rerun", ledger] + list(arguments), capture_output=True, text=True,
                          timeout=300)


def derive_again(place):
    """Every ledger that a test leaves follows from its own inputs, to the byte. (What is no ledger is not opened.)"""
    ledgers = [os.path.join(path, name) for path, _, names in os.walk(place) for name in sorted(names)
               if name.endswith(".ledger")]
    answers = [(ledger, done) for ledger, done in ((ledger, rerun(ledger)) for ledger in ledgers) if done.stdout]
    if answers:
        wrong = [(ledger, done.returncode, done.stdout, done.stderr) for ledger, done in answers if done.returncode != 0]
        check("every ledger that this test leaves is the same when it is derived again", not wrong, wrong)
        print("# rerun %d of %d ledgers identical" % (len(answers) - len(wrong), len(answers)), flush=True)


class Folder(tempfile.TemporaryDirectory):
    def __exit__(self, kind, error, trace):
        if kind is None:
            derive_again(self.name)
        super().__exit__(kind, error, trace)


def folder():
    """A folder of this test's own under the build folder. At its end every ledger in it is derived again, then it goes."""
    os.makedirs(BUILD + "/try", exist_ok=True)
    return Folder(dir=BUILD + "/try")


CALIBRATED = '{ role = "both"; sensitivity_db = -180.0; full_scale_v = 1.0; }'


def settings(path, permit="config/permits/demonstration.cfg", stream='input = "recording"; files = ["none.wav"];',
             channels=CALIBRATED, ledger="watch.ledger", more=""):
    """Writes a settings file and returns its path."""
    with open(path, "w") as file:
        file.write('name = "test"; ledger = "%s"; permit = "%s"; calls = "%s";\n' %
                   (ledger, os.path.join(ROOT, permit), os.path.join(ROOT, "config/calls")))
        file.write("streams = ( { %s %s } );\n%s\n" % (stream, "channels = ( %s );" % channels if channels else "", more))
    return path


def scan(config, ledger, *arguments, timeout=300):
    """Runs the scan; returns the finished process."""
    return subprocess.run([BUILD + "/hushwatch", "scan", "--config", config, "--ledger", ledger] + list(arguments),
                          capture_output=True, text=True, timeout=timeout)


def ask(ledger, sql, *parameters):
    connection = sqlite3.connect("file:%s?mode=ro" % ledger, uri=True)
    try:
        return connection.execute(sql, parameters).fetchall()
    finally:
        connection.close()


def entries(ledger, left_out=("run", "health", "clock", "stamp")):
    """(utc, kind, body) in order, without the kinds that may differ between two hearings of the same sound."""
    return [row for row in ask(ledger, "SELECT utc, kind, body FROM entry ORDER BY seq") if row[1] not in left_out]


def verify(ledger):
    return subprocess.run([BUILD + "/hushwatch", "verify", ledger], capture_output=True, text=True, timeout=120)


def body(text):
    return json.loads(text)
