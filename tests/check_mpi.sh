#!/bin/bash
# twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
# SPDX-License-Identifier: GPL-3.0-or-later
#
# A sweep on several processes gives the bytes of the serial one: check_mpi.sh PROGRAM. TAP.
# The MPI program is looked for beside PROGRAM, in mpi/ (make MPI=1); without it this is skipped.
set -u
program=$(realpath "$1")
parallel=$(dirname "$program")/mpi/twinhorizon
if [ ! -x "$parallel" ] || ! command -v mpirun >/dev/null; then
    echo "1..0 # SKIP no MPI build (make MPI=1)"
    exit 0
fi
cases=$(cd "$(dirname "$0")/../cases" && pwd)
folder=$(mktemp -d)
trap 'rm -rf "$folder"' EXIT
cd "$folder" || exit 1
number=0
check() { # check NAME COMMAND...
    local name=$1
    shift
    number=$((number + 1))
    if "$@" >log 2>&1; then
        echo "ok $number - $name"
    else
        echo "not ok $number - $name"
        sed 's/^/#   /' log
    fi
}
mpi() {
    mpirun --allow-run-as-root --oversubscribe -n 3 "$parallel" "$@"
}
same() {
    cmp serial/points.csv "$1/points.csv" && cmp serial/modes.csv "$1/modes.csv" &&
        cmp serial/events.csv "$1/events.csv"
}
refused() { # a failure of rank 0 ends all ranks, with its sentence once
    ! timeout 60 mpirun --allow-run-as-root --oversubscribe -n 3 "$parallel" "$@" 2>err
    [ "$(grep -c '^twinhorizon: ' err)" = 1 ]
}
gaps="sweep.gap=0.5 to 20 in 200"
"$program" sweep "$cases/step.ini" --set "$gaps" --out serial >/dev/null
check "three processes run" mpi sweep "$cases/step.ini" --set "$gaps" --out ranks
check "same bytes as one process" same ranks
head -c "$(($(wc -c <ranks/journal) / 2))" ranks/journal >half
mkdir resumed && mv half resumed/journal
check "they resume" mpi sweep "$cases/step.ini" --set "$gaps" --out resumed --resume
check "same bytes after resuming" same resumed
check "a finished folder is refused" refused sweep "$cases/step.ini" --set "$gaps" --out ranks
check "a missing case is refused" refused sweep missing.ini --out ranks
echo "1..$number"
