# tests/end/lib.sh - what the end-to-end scripts share: a scratch folder, checks that say what they expected, a small collection
# SPDX-License-Identifier: BSD-2-Clause
set -u
export LC_ALL=C.UTF-8 NO_COLOR=1
umask 022
: "${FIRN:?names the program}" "${DAMAGE:?names the tool that spoils files}"
scratch=$(mktemp -d "${TMPDIR:-/tmp}/firn-end.XXXXXX")
cd "$scratch" || exit 1
export XDG_STATE_HOME=$scratch/state
checks=0 failures=0
trap 'chmod -R u+rwX "$scratch" 2>/dev/null; rm -rf "$scratch"' EXIT

ok() { checks=$((checks + 1)); }
bad() { checks=$((checks + 1)); failures=$((failures + 1)); echo "NOT AS EXPECTED: $*"; }

# exits STATUS COMMAND...: output goes to out and err
exits() {
    local wanted=$1 got
    shift
    "$@" >out 2>err
    got=$?
    if [ "$got" -eq "$wanted" ]; then ok; else bad "$* : exit $got, wanted $wanted"; head -5 out err; fi
}
# says FILE WORDS: the file has these words in it
says() { if grep -qF -- "$2" "$1"; then ok; else bad "$1 does not say '$2':"; head -5 "$1"; fi; }
says_not() { if grep -qF -- "$2" "$1"; then bad "$1 says '$2'"; else ok; fi; }
silent() { if [ ! -s "$1" ]; then ok; else bad "$1 is not silent:"; head -5 "$1"; fi; }
same() { if cmp -s "$1" "$2"; then ok; else bad "$1 and $2 differ"; fi; }
there() { if [ -e "$1" ]; then ok; else bad "$1 is not there"; fi; }
gone() { if [ ! -e "$1" ] && [ ! -L "$1" ]; then ok; else bad "$1 is there"; fi; }
count_is() { if [ "$1" -eq "$2" ]; then ok; else bad "$3: $1, wanted $2"; fi; }
one_line() { count_is "$(wc -l <"$1")" 1 "lines in $1 ($(head -c 300 "$1"))"; }

# heedful COMMAND...: bash lets what it starts in the background ignore SIGINT; this one heeds it
heedful() { exec env --default-signal=INT "$@"; }

# facts FOLDER: all there is to know of a tree, in words
facts() {
    (cd "$1" && find . -mindepth 1 \( -type f -printf '%P|%y|%m|%U:%G|%T@|%s|%n\n' -o -type l -printf '%P|%y|%U:%G|%T@|%l\n' \
        -o \( -type b -o -type c \) -printf '%P|%y|%m|%U:%G\n' -o -printf '%P|%y|%m|%U:%G|%T@\n' \) | sort
        find . -type f -print0 | sort -z | xargs -0 -r sha256sum
        getfattr -R -h -d -m - . 2>/dev/null | grep -v '^$'
        getfacl -R -n -p . 2>/dev/null | grep -E '^(# file|user:[0-9]|group:[0-9]|default|mask)')
}
alike() {
    facts "$1" >facts.1
    facts "$2" >facts.2
    if cmp -s facts.1 facts.2; then ok; else bad "$1 and $2 are not alike:"; diff facts.1 facts.2 | head -10; fi
}

# collection FOLDER [KIB]: an invented one, a few hundred files of several kinds
collection() {
    local folder=$1 kib=${2:-3000} i
    mkdir -p "$folder/ledgers/1931" "$folder/letters" "$folder/maps" "$folder/empty folder"
    for i in $(seq 1 120); do
        printf 'Marrow Quay, letter %d: the tide table of berth %d was %d fathoms out.\n%.0s' "$i" $((i % 7)) $((i * 37 % 11)) \
            $(seq 1 $((i % 23 + 1))) >"$folder/letters/$i.txt"
    done
    awk -v n=$((kib * 20)) 'BEGIN { srand(7); for (i = 0; i < n; i++) printf "%05d;%d;%.2f;paid\n", i, rand() * 1000, rand() * 99 }' \
        >"$folder/ledgers/1931/quay.csv"
    openssl rand -out "$folder/maps/harbour.bin" $((kib * 512)) 2>/dev/null || head -c $((kib * 512)) /dev/urandom >"$folder/maps/harbour.bin"
    head -c $((kib * 100)) /dev/zero >"$folder/maps/blank.pgm"
    : >"$folder/ledgers/nothing"
    ln -s ../letters/1.txt "$folder/maps/first letter"
    ln "$folder/letters/2.txt" "$folder/ledgers/same as 2"
    touch -d '1931-05-07 08:09:10.123456789 UTC' "$folder/letters/3.txt" "$folder/maps"
    chmod 0640 "$folder/letters/4.txt"
}

finish() {
    echo "$((checks - failures)) passed, $failures failed"
    [ "$checks" -gt 0 ] && [ "$failures" -eq 0 ]
    exit
}
