#!/usr/bin/env bash
# Set up what the tests need and run them; arguments go to pytest.
set -euo pipefail
source "$(dirname "${BASH_SOURCE[0]}")/environment.sh"
ensure_environment standalone,test,check
.venv/bin/python -m pytest "$@"
