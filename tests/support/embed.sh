#!/bin/sh
# Writes C source that holds the given files: struct web_file web_files[], closed by an empty name. Indentation, empty lines
# and lines that are nothing but a comment stay in the source: a page's link may be slow.
echo '/* Generated from the files of web/. */'
echo '#include "http/web.h"'
lean() {
    case $1 in
    *.css) sed -E 's/^[ \t]+//; /^\/\*.*\*\/$/d; /^$/d; s/ \{ /{/g; s/ \{$/{/; s/; /;/g; s/: /:/g; s/, /,/g; s/;? \}/}/g' "$1" ;;
    *.js | *.html) sed -E 's/^[ \t]+//; /^\/\//d; /^\/\*.*\*\/$/d; /^$/d' "$1" ;;
    *) cat "$1" ;;
    esac
}
n=0
for f in "$@"; do
    echo "static const unsigned char file_$n[] = {"
    lean "$f" | od -An -v -tx1 | sed 's/ \([0-9a-f][0-9a-f]\)/0x\1,/g'
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
