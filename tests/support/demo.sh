#!/bin/sh
# Plays the demonstration: the daemon on an invented scene, with a ledger of its own that begins anew each time.
# usage: demo.sh BUILD_FOLDER
set -eu
build=$1
rm -f build/demonstration.ledger build/demonstration.ledger-wal build/demonstration.ledger-shm
mkdir -p build
echo "An invented piling watch of eight minutes begins. Open both pages; end it with Ctrl-C. Afterwards:"
echo "  $build/hushwatch verify build/demonstration.ledger"
echo "  $build/hushwatch report build/demonstration.ledger --sheet build/demonstration.html"
exec "$build/hushwatchd" --config config/demonstration.cfg
