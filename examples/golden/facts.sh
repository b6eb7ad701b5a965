# examples/golden/facts.sh - what is known of a tree, in lines: kind, mode, time, size, name, target; then SHA-256 of files
# SPDX-License-Identifier: BSD-2-Clause
# Sourced by make and by tests/spec/golden: the expected manifests are these lines, taken from the collections themselves.

golden_facts() {
    (cd "$1" && export LC_ALL=C TZ=UTC0 && {
        find . -mindepth 1 \( -type f -printf '%y %m %T+ %s %P\n' -o -type l -printf '%y - - - %P -> %l\n' -o -printf '%y %m %T+ - %P\n' \) | sort
        find . -type f -print0 | sort -z | xargs -0 -r sha256sum
    })
}
