#!/usr/bin/env bash
# Runs the tests but the slow ones; --all runs those, too. Other arguments go on to pytest.
set -euo pipefail
ROOT="$(cd "$(dirname "${BASH_SOURCE[0]}")/.." && pwd)"
source "$ROOT/.ci/python.sh"

prepare_python test
cd "$ROOT"
exec "$PYTHON" -m pytest "$@"
