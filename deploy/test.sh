#!/bin/sh
# Runs every check of this checkout: lint, types, boundaries, spelling, scripts, and all tests but
# those marked `long` and `bench`. Arguments go to pytest. All checks run even where one fails.
# Where the server programs of PostgreSQL are missing, its tests are skipped; with CI=true that fails.
set -eu
# shellcheck source-path=SCRIPTDIR source=environment.sh
. "$(dirname -- "$0")/environment.sh"

environment requirements-test.lock
cd "$checkout"
PATH=$venv/bin:$PATH
export PATH
began=$(date +%s)
failed=

# check NAME COMMAND...: runs it, and remembers the name where it fails.
check() {
    name=$1
    shift
    printf '\n== %s\n' "$name"
    "$@" || failed="$failed${failed:+, }$name"
}

has_postgresql() {
    bindir=$(pg_config --bindir 2>/dev/null) || bindir=
    for initdb in "$bindir/initdb" /usr/lib/postgresql/*/bin/initdb /usr/pgsql-*/bin/initdb \
        "$(command -v initdb)"; do
        [ -x "$initdb" ] && [ -x "$(dirname "$initdb")/postgres" ] && return
    done
    echo "The server programs of PostgreSQL are missing: its tests are skipped."
    [ "${CI:-}" != true ]
}

check "ruff check" ruff check .
check "ruff format" ruff format --check .
check "mypy" mypy
check "import contracts" lint-imports
check "codespell" codespell
check "shellcheck" shellcheck deploy/*.sh .ci/run
check "PostgreSQL" has_postgresql
check "pytest" python -m pytest -n 2 -m "not long and not bench" -r fEs "$@"

took=$(($(date +%s) - began))
if [ -n "$failed" ]; then
    printf '\n%s: failed after %s s: %s\n' "$script" "$took" "$failed"
    exit 1
fi
printf '\n%s: every check passed in %s s\n' "$script" "$took"
