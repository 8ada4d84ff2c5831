#!/bin/sh
# twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
# SPDX-License-Identifier: GPL-3.0-or-later
#
# For every case in tests/broken (see tests/test_broken.c for the files) the program must leave with
# 2, print nothing on standard output and exactly "twinhorizon: SENTENCE" on standard error.
# Argument: the program. Prints TAP; exit status 0 when all is well.
program=$(realpath "${1:?usage: test_broken.sh PROGRAM}") || exit 1
cd "$(dirname "$0")/broken" || exit 1
scratch=$(mktemp -d) || exit 1
trap 'rm -rf "$scratch"' EXIT

set -- *.expect
echo "1..$#"
number=0
failed=0
for expect in "$@"; do
    number=$((number + 1))
    stem=${expect%.expect}
    set -- flow "$stem.ini"
    if [ -e "$stem.set" ]; then
        while IFS= read -r line; do
            set -- "$@" --set "$line"
        done <"$stem.set"
    fi
    LC_ALL=C "$program" "$@" >"$scratch/out" 2>"$scratch/err"
    status=$?
    printf 'twinhorizon: %s\n' "$(cat "$expect")" >"$scratch/want"
    if [ "$status" -eq 2 ] && [ ! -s "$scratch/out" ] && cmp -s "$scratch/want" "$scratch/err"; then
        echo "ok $number - $stem"
    else
        echo "not ok $number - $stem"
        echo "# exit status $status, want 2"
        sed 's/^/# want: /' "$scratch/want"
        sed 's/^/# have: /' "$scratch/err"
        sed 's/^/# standard output: /' "$scratch/out"
        failed=1
    fi
done
exit "$failed"
