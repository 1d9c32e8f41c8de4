#!/bin/sh
# The ring's test under a race detector: clean as it is; reported when its ordering is relaxed.
# ThreadSanitizer is the reference: the C11 memory model as gcc and clang check it.
set -u
build=${HUSHWATCH_BUILD:-build}
folder=$(mktemp -d "$build/ring_races.XXXXXX") || exit 1
trap 'rm -rf "$folder"' EXIT
compiler=${HUSHWATCH_RACE_COMPILER:-gcc}
failures=0

check() { # check NAME RESULT
    if [ "$2" = 0 ]; then echo "ok - $1"; else
        echo "not ok - $1"
        failures=1
    fi
}

build_variant() { # build_variant NAME [FLAG]
    $compiler -std=c11 -D_GNU_SOURCE -Ilib -Itests -O1 -g -fsanitize=thread -pthread ${2:-} \
        lib/ring/ring.c lib/base/random.c tests/support/test.c tests/unit/ring.c -o "$folder/$1" -lcmocka -lm
}

for variant in right relaxed; do
    flag=
    [ $variant = relaxed ] && flag=-DRING_RELAXED
    build_variant $variant $flag
    check "the $variant ring builds under ThreadSanitizer" $?
    HUSHWATCH_LENGTH=short TSAN_OPTIONS=halt_on_error=0:exitcode=66 CMOCKA_MESSAGE_OUTPUT=STDOUT \
        "$folder/$variant" >"$folder/$variant.txt" 2>&1
    echo $? >"$folder/$variant.code"
done

right=$(cat "$folder/right.code") relaxed=$(cat "$folder/relaxed.code")
reports=$(grep -c 'WARNING: ThreadSanitizer: data race' "$folder/right.txt")
[ "$right" = 0 ] && [ "$reports" = 0 ]
check "the ring passes and no race is reported" $?
[ "$failures" = 0 ] || sed 's/^/# /' "$folder/right.txt" | head -60
reports=$(grep -c 'WARNING: ThreadSanitizer: data race' "$folder/relaxed.txt")
[ "$relaxed" != 0 ] && [ "$reports" -gt 0 ]
check "with relaxed ordering the test fails with a reported race" $?
echo "# figure races reported: right 0, relaxed $reports ($compiler)"
exit $failures
