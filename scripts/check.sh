#!/usr/bin/env bash
# Style, types and the one-way arrows between rooms.
set -euo pipefail
source "$(dirname "${BASH_SOURCE[0]}")/environment.sh"
ensure_environment standalone,test,check
.venv/bin/ruff check .
.venv/bin/ruff format --check .
.venv/bin/mypy
.venv/bin/lint-imports
