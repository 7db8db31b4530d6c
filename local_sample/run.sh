#!/usr/bin/env bash
# Runs the whole pipeline on the bundled sample in local mode and shows the first candidates.
# Arguments go on to jobs/run_pipeline.py, such as --set solve.damping=0.9 --replace.
set -euo pipefail
ROOT="$(cd "$(dirname "${BASH_SOURCE[0]}")/.." && pwd)"
source "$ROOT/.ci/python.sh"

prepare_python local
"$PYTHON" "$ROOT/jobs/run_pipeline.py" --config "$ROOT/local_sample/config.toml" "$@"
exec "$PYTHON" "$ROOT/local_sample/show.py" --config "$ROOT/local_sample/config.toml" "$@"
