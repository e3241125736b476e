#!/bin/sh
# Renews both locks from pyproject.toml; needs `uv` and a package index. The present pins stay
# where they still satisfy pyproject.toml: pass --upgrade, or --upgrade-package NAME, to move them.
# Neither index addresses nor paths of the machine are written, so a lock serves any mirror.
set -eu
cd "$(dirname "$0")/.."

lock() {
    target=$1
    shift
    uv pip compile --quiet --generate-hashes --universal --python-version 3.11 \
        --no-emit-index-url --no-emit-find-links --no-emit-index-annotation --no-header \
        --no-annotate --output-file "$target" pyproject.toml "$@"
}

lock deploy/requirements.lock --extra pg "$@"
# The tests run on the very releases that are served.
lock deploy/requirements-test.lock --extra pg --extra test \
    --constraint deploy/requirements.lock "$@"
