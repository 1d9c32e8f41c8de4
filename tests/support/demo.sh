#!/bin/sh
# Plays the demonstration: the daemon on an invented scene, with a ledger of its own that begins anew each time.
# usage: demo.sh BUILD_FOLDER
set -eu
build=$1
ledger=build/demonstration.ledger
mkdir -p build
# A demonstration that plays holds this lock: its ledger is not taken from under it.
if [ -e "$ledger.lock" ] && ! flock --nonblock "$ledger.lock" true; then
    echo "The demonstration plays already; its pages are at http://127.0.0.1:8470/" >&2
    exit 1
fi
rm -f "$ledger" "$ledger-wal" "$ledger-shm"
echo "An invented piling watch of eight minutes begins. Open both pages; end it with Ctrl-C. Afterwards:"
echo "  $build/hushwatch verify $ledger"
echo "  $build/hushwatch report $ledger --sheet build/demonstration.html"
exec "$build/hushwatchd" --config config/demonstration.cfg
