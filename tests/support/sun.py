"""Where the sun stands, by other formulas than the program's: Meeus, Astronomical Algorithms (1998), chapters 12, 13, 25 and
28, as in the spreadsheet of NOAA's solar calculator; good to a hundredth of a degree in our century. From memory."""
import math

SUNRISE_DEG = -0.833


def elevation_deg(unix_s, latitude_deg, longitude_deg):
    century = (unix_s / 86400.0 + 2440587.5 - 2451545.0) / 36525.0
    mean = math.radians((280.46646 + century * (36000.76983 + century * 0.0003032)) % 360)
    anomaly = math.radians(357.52911 + century * (35999.05029 - 0.0001537 * century))
    centre = (math.sin(anomaly) * (1.914602 - century * (0.004817 + 0.000014 * century)) +
              math.sin(2 * anomaly) * (0.019993 - 0.000101 * century) + math.sin(3 * anomaly) * 0.000289)
    node = math.radians(125.04 - 1934.136 * century)
    longitude = mean + math.radians(centre - 0.00569 - 0.00478 * math.sin(node))
    tilt = math.radians(23 + (26 + (21.448 - century * (46.815 + century * (0.00059 - century * 0.001813))) / 60) / 60 +
                        0.00256 * math.cos(node))
    declination = math.asin(math.sin(tilt) * math.sin(longitude))
    e = 0.016708634 - century * (0.000042037 + 0.0000001267 * century)
    y = math.tan(tilt / 2) ** 2
    equation_min = 4 * math.degrees(
        y * math.sin(2 * mean) - 2 * e * math.sin(anomaly) + 4 * e * y * math.sin(anomaly) * math.cos(2 * mean) -
        0.5 * y * y * math.sin(4 * mean) - 1.25 * e * e * math.sin(2 * anomaly))
    hour = math.radians((unix_s % 86400) / 240 + equation_min / 4 + longitude_deg - 180)
    latitude = math.radians(latitude_deg)
    return math.degrees(math.asin(math.sin(latitude) * math.sin(declination) +
                                  math.cos(latitude) * math.cos(declination) * math.cos(hour)))


def check_light(zero_s, latitude, longitude, lights, after_sunrise, before_sunset, hours):
    """Whether lights, (nanoseconds after zero_s, day or dark), are the day from so long after sunrise to so long before
    sunset: looked at in every quarter of an hour, and 2 min before and after each change. In words what is not."""
    def up(at_s):
        return elevation_deg(zero_s + at_s, latitude, longitude) - SUNRISE_DEG

    def day(at_s):
        """None: the edge is near, and a hundredth of a degree decides."""
        looks = [up(at_s), up(at_s - 60 * after_sunrise), up(at_s + 60 * before_sunset)]
        if min(abs(x) for x in looks) < 0.03:
            return None
        now, risen, setting = (x > 0 for x in looks)
        return (now and (risen or after_sunrise <= 0) and (setting or before_sunset <= 0) or
                not now and (after_sunrise < 0 and risen or before_sunset < 0 and setting))

    def said(at_s):
        return [name for at, name in lights if at <= at_s * 1e9][-1] == "day"
    looks = [7200 * i for i in range(hours // 2)] + [max(0, at / 1e9 + d) for at, _ in lights[1:] for d in (-120, 120)]
    return ["light at %d + %d s, %g N %g E: %s by the sun" % (zero_s, at, latitude, longitude, day(at)) for at in looks
            if day(at) is not None and day(at) != said(at)]
