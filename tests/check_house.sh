#!/bin/bash
# The rules of the house that a machine can check: check_house.sh PROGRAM. Prints TAP.
# The archive and the shared library are looked for beside PROGRAM.
set -u
export LC_ALL=C
cd "$(dirname "$0")/.." || exit 1
archive=$(dirname "$1")/libtwinhorizon.a
shared=$(dirname "$1")/libtwinhorizon.so

# What may include what: "subject: the subjects it may include", and through them all that those
# may include. A subject is a public header, a file or a folder of src by its name without ending.
# A new subject needs a line here; an arrow that would close a circle is reported.
arrows='
version:
status:
alloc:
buffer:
io_error: status
csv:      buffer alloc io_error
units:    alloc status
table:    csv units version
dispersion: units
data:     units io_error
gll:      status
workspace: alloc status
flow:     data workspace gll
case:     flow buffer
mesh:     flow dispersion gll
lapack:   alloc status
operator: mesh lapack buffer
spectrum: operator
matching: flow dispersion
census:   matching
index:    mesh lapack
index_closed: index
modes:    spectrum census index
sensitivity: matching
uncertainty: matching
count_distance: index
profile:  modes
seed:     modes
point:    modes
journal:  case point
parallel: alloc status
sweep:    journal parallel buffer io_error version
track:    sweep
tolerance: point sensitivity parallel
semiclassics: flow
pattern:  profile dispersion
validity: flow
onset:    modes case parallel
cli:      sweep onset profile sensitivity uncertainty count_distance table version track tolerance semiclassics pattern validity seed
'

number=0 bad=0
# report NAME OFFENDERS: one result; it holds when there are no offenders.
report() {
    number=$((number + 1))
    if [ -z "$2" ]; then
        echo "ok $number - $1"
    else
        bad=$((bad + 1))
        echo "not ok $number - $1"
        echo "#   ${2//$'\n'/$'\n'#   }"
    fi
}

files() { # files that belong to the project, tracked or about to be
    git ls-files -co --exclude-standard 2>/dev/null | grep . || find . -type f -not -path './.git/*' \
        -not -path './build/*' -printf '%P\n'
}
project=$(files | while read -r file; do [ ! -f "$file" ] || echo "$file"; done)
mapfile -t sources < <(grep -E '^(src|include)/.*\.[ch]$' <<<"$project")
mapfile -t program < <(grep '^src/cli/.*\.[ch]$' <<<"$project")

report "library and program are built" "$(for f in "$archive" "$shared" "$1"; do
    [ -s "$f" ] || echo "$f is missing"
done)"

# printf to a buffer and files that a caller named are fine; the process's streams, its end, its
# environment and its other programs are not. Fortified names end in _chk.
report "the library never prints, exits or looks around" "$(nm -A -u "$archive" | awk '
    { name = $NF; sub(/^__/, "", name); sub(/_chk$/, "", name) }
    name ~ /^(v?printf|v?fprintf|v?dprintf|puts|putchar|perror|psignal)$/ ||
    name ~ /^(exit|_exit|_Exit|quick_exit|abort|assert_fail|raise|kill|signal|sigaction|atexit)$/ ||
    name ~ /^(getenv|secure_getenv|environ|setenv|putenv|setlocale)$/ ||
    name ~ /^(stdin|stdout|stderr|getchar)$/ ||
    name ~ /^(system|popen|fork|vfork|exec[lv]p?e?|posix_spawnp?)$/ ||
    name ~ /^(rand|srand|strtok|strerror|localtime|gmtime|ctime|asctime)$/ { print }')"

# Constants with addresses in them (.data.rel.ro) are constant once the library is loaded.
report "the library keeps no mutable globals" "$(objdump -t "$archive" | awk '
    /file format/ { object = $1 }
    NF > 4 && $(NF - 2) ~ /^\.(t?data|t?bss)(\.|$)/ || NF > 4 && $(NF - 2) == "*COM*" {
        section = $(NF - 2)
        if (section !~ /^\.data\.rel\.ro/ && $NF !~ /^\./) print object, section, $NF }')"

report "every external symbol starts with th_" "$(nm -A -g --defined-only "$archive" |
    awk '$NF !~ /^th_/')"
report "the shared library exports th_ only" "$(nm -D --defined-only "$shared" |
    awk '$NF !~ /^th_/ && $NF != "TWINHORIZON_0"')" # the name of the symbols' version

report "at most one file includes lapacke.h" "$(grep -l '[<"]lapacke\.h' "${sources[@]}" |
    awk '{ line[NR] = $0 } END { if (NR > 1) for (i = 1; i <= NR; i++) print line[i] }')"

# GSL: its aborting handler is turned off, pi is taken from it, its version is shown.
report "the program sees public headers only" "$(
    for file in "${program[@]}"; do
        sed -n 's/^ *# *include *//p' "$file" | while read -r header; do
            [[ $header =~ ^\<((twinhorizon/|sys/)?[a-z_0-9]+|gsl/gsl_(errno|math|version))\.h\> ]] && continue
            name=${header#\"}
            [[ $header == \"* && -f src/cli/${name%%\"*} ]] || echo "$file: $header"
        done
    done)"

# Each include of the project's own files, as "file subject included-subject".
includes=$(for file in "${sources[@]}"; do
    sed -n 's/^ *# *include [<"]\([^">]*\)[">].*/\1/p' "$file" | while read -r header; do
        folder=$(dirname "$file")
        for candidate in "$folder/$header" "src/$header" "include/$header"; do
            [ -f "$candidate" ] && echo "$file $(realpath --relative-to=. "$candidate")" && break
        done
    done
done | awk '
    function subject(path) {
        sub(/^(src|include\/twinhorizon)\//, "", path)
        sub(/[\/.].*/, "", path)
        return path
    }
    { print $1, subject($1), subject($2) }')
report "arrows go one way" "$(awk '
    NR == FNR {
        if ($1 == "") next
        name = substr($1, 1, length($1) - 1)
        known[name] = 1
        for (i = 2; i <= NF; i++) may[name, $i] = 1
        next
    }
    FNR == 1 {
        for (k in known) for (i in known) for (j in known)
            if (may[i, k] && may[k, j]) may[i, j] = 1
        for (i in known) if (may[i, i]) print "the table of arrows has a circle through " i
    }
    $2 != $3 && !(($2, $3) in may && may[$2, $3]) { print $1 ": " $2 " may not include " $3 }
    !($2 in known) && !told[$2]++ { print $1 ": " $2 " is not in the table of arrows" }
    ' <(echo "$arrows") <(echo "$includes"))"

report "no file is called util or common" "$(grep -iE '(^|/)(utils?|common)(\.[^/]*)?(/|$)' \
    <<<"$project")"
report "no source is longer than 600 lines" "$(wc -l "${sources[@]}" | awk '$1 > 600 && $2 != "total"')"
report "the top level holds what it may hold" "$(cut -d/ -f1 <<<"$project" | sort -u |
    grep -vE '^(src|include|tests|cases|Makefile|README\.md|DEVELOPERS\.md|LICENSE|\..*)$')"

version=$(sed -n 's/^#define TH_VERSION "\(.*\)"/\1/p' include/twinhorizon/version.h)
# ELF, archives, Python's and pictures' compiled forms do not belong into a source tree.
report "no compiled file is part of the project" "$(while read -r file; do
    case $(head -c 4 "$file" | od -An -c | tr -d ' ') in
    177ELF | '!<ar' | '037213'*) echo "$file" ;;
    esac
    case $file in *.o | *.a | *.so | *.pyc | *.class) echo "$file" ;; esac
done <<<"$project")"

report "the version is written once" "$([ -n "$version" ] || echo "no TH_VERSION in version.h"
    grep -v -e '^include/twinhorizon/version\.h$' -e '^LICENSE$' <<<"$project" |
        xargs grep -nE "(^|[^0-9.])${version//./\\.}([^0-9.]|$)")"

echo "1..$number"
exit $((bad > 0))
