"""A real gpsd on a loopback port, fed with NMEA 0183 sentences through a pseudo terminal, for tests."""
import math
import os
import pty
import shutil
import socket
import subprocess
import threading
import time
import tty

GPSD = shutil.which("gpsd") or (os.path.exists("/usr/sbin/gpsd") and "/usr/sbin/gpsd")


def free_port():
    with socket.socket() as handle:
        handle.bind(("127.0.0.1", 0))
        return handle.getsockname()[1]


def _sentence(text):
    check = 0
    for letter in text:
        check ^= ord(letter)
    return ("$%s*%02X\r\n" % (text, check)).encode()


def _angle(degrees, letters, width):
    whole = int(abs(degrees))
    return "%0*d%010.7f,%s" % (width, whole, 60 * (abs(degrees) - whole), letters[degrees < 0])


class Receiver:
    """Sends one fix a second, with a true heading, while `sends` is true."""

    def __init__(self, latitude_deg, longitude_deg, heading_deg):
        self.latitude_deg, self.longitude_deg, self.heading_deg = latitude_deg, longitude_deg, heading_deg
        self.sends = True
        self.port = free_port()
        self.daemon = None
        self.master, self.slave = pty.openpty()
        tty.setraw(self.slave)
        os.chmod(os.ttyname(self.slave), 0o666)
        threading.Thread(target=self._send, daemon=True).start()

    def _send(self):
        while True:
            now = time.gmtime()
            clock, day = time.strftime("%H%M%S.00", now), time.strftime("%d%m%y", now)
            place = "%s,%s" % (_angle(self.latitude_deg, "NS", 2), _angle(self.longitude_deg, "EW", 3))
            if self.sends and self.daemon:
                os.write(self.master, _sentence("GPHDT,%.1f,T" % self.heading_deg) +
                         _sentence("GPGGA,%s,%s,1,08,0.9,5.0,M,40.0,M,," % (clock, place)) +
                         _sentence("GPRMC,%s,A,%s,4.0,090.0,%s,,,A" % (clock, place, day)))
            time.sleep(1)

    def start(self):
        self.daemon = subprocess.Popen([GPSD, "-N", "-n", "-b", "-S", str(self.port), os.ttyname(self.slave)],
                                       stdout=subprocess.DEVNULL, stderr=subprocess.DEVNULL)

    def stop(self):
        if self.daemon:
            self.daemon.terminate()
            self.daemon.wait()
            self.daemon = None


def metres_north(latitude_deg, north_m):
    """The latitude so many metres north: the radius of curvature of the meridian (closed form, WGS84)."""
    e2 = (2 - 1 / 298.257223563) / 298.257223563
    radius_m = 6378137.0 * (1 - e2) / (1 - e2 * math.sin(math.radians(latitude_deg)) ** 2) ** 1.5
    return latitude_deg + math.degrees(north_m / radius_m)
