#!/bin/sh
# Starts Rimeward from this checkout: makes its environment the first time, then serves.
# Arguments go to `rimeward serve`, settings are read from RIMEWARD_* (see README.md).
# environment.sh says where the environment lies and how to bring one's own.
set -eu
# shellcheck source-path=SCRIPTDIR source=environment.sh
. "$(dirname -- "$0")/environment.sh"

environment requirements.lock
PYTHONPATH=$checkout
export PYTHONPATH
# -P keeps a folder `service` in the working directory from being run instead.
exec "$venv/bin/python" -P -m service serve "$@"
