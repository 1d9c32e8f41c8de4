#!/bin/sh
# Writes C source that holds the given files: struct web_file web_files[], closed by an empty name.
echo '/* Generated from the files of web/. */'
echo '#include "http/web.h"'
n=0
for f in "$@"; do
    echo "static const unsigned char file_$n[] = {"
    od -An -v -tx1 "$f" | sed 's/ \([0-9a-f][0-9a-f]\)/0x\1,/g'
    echo '0};'
    n=$((n + 1))
done
echo 'const struct web_file web_files[] = {'
n=0
for f in "$@"; do
    echo "{\"$(basename "$f")\", file_$n, sizeof file_$n - 1},"
    n=$((n + 1))
done
echo '{0, 0, 0}};'
