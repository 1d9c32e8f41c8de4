#!/bin/sh
# The service unit, by systemd's own checks: what it exposes (at most 2.0 of 10) and that systemd can read it.
set -u
unit=systemd/hushwatchd.service
if ! command -v systemd-analyze >/dev/null; then
    echo "ok - the unit exposes little # SKIP no systemd-analyze"
    exit 0
fi
folder=$(mktemp -d) || exit 1
trap 'rm -rf "$folder"' EXIT
failures=0

check() { # check NAME RESULT
    if [ "$2" = 0 ]; then echo "ok - $1"; else
        echo "not ok - $1"
        sed 's/^/# /' "$folder/said"
        failures=1
    fi
}

systemd-analyze security --no-pager --offline=true --threshold=20 "$unit" >"$folder/said" 2>&1
check "the unit exposes at most 2.0 of 10" $?
sed -n 's/.*\(Overall exposure.*\)/# figure \1/p' "$folder/said"

# verify wants the program to exist: the unit with a program that surely does.
sed 's|^ExecStart=[^ ]*|ExecStart=/bin/true|' "$unit" >"$folder/hushwatchd.service"
systemd-analyze verify --man=no "$folder/hushwatchd.service" >"$folder/said" 2>&1
result=$?
grep -q 'Unknown\|Failed to parse\|ignoring' "$folder/said" && result=1
check "systemd knows every setting of the unit" $result

# Without its hardening the same check fails: the threshold can tell.
sed -n '/^\[Unit\]/,/^TimeoutStopSec/p' "$unit" >"$folder/hushwatchd.service"
if systemd-analyze security --no-pager --offline=true --threshold=20 "$folder/hushwatchd.service" >"$folder/said" 2>&1; then
    check "a bare unit is told apart" 1
else
    check "a bare unit is told apart" 0
fi
exit $failures
