# Sourced by the other scripts: an environment in .venv beside this folder, made when it is missing
# and renewed when pyproject.toml, the pinned versions or the Python version change.

ROOT="$(cd "$(dirname "${BASH_SOURCE[0]}")/.." && pwd)"
cd "$ROOT"

PYTHON="${PYTHON:-python3}"

if ! command -v "$PYTHON" > /dev/null; then
  echo "scripts: $PYTHON is not there; install Python 3.11 or later, or set PYTHON to one" >&2
  exit 2
fi
if ! "$PYTHON" -c 'import sys; sys.exit(sys.version_info < (3, 11))'; then
  echo "scripts: $PYTHON is $("$PYTHON" --version 2>&1); Python 3.11 or later is needed, set PYTHON" >&2
  exit 2
fi

# Where an environment is active already, the Python that it was made with.
PYTHON="$("$PYTHON" -c 'import sys; print(getattr(sys, "_base_executable", sys.executable))')"

wanted="$("$PYTHON" - << 'PY'
import hashlib, pathlib, sys
parts = [sys.version, str(pathlib.Path.cwd())]
parts += [pathlib.Path(p).read_text() for p in ("pyproject.toml", "scripts/constraints.txt")]
print(hashlib.sha256("\n".join(parts).encode()).hexdigest())
PY
)"
stamp=.venv/installed

if [ "$(cat "$stamp" 2> /dev/null || true)" != "$wanted" ] || ! .venv/bin/python -c ''; then
  echo "scripts: installing into .venv; this takes a minute or two, once" >&2
  rm -rf .venv
  if ! "$PYTHON" -m venv .venv; then
    rm -rf .venv
    echo "scripts: $PYTHON cannot make an environment; on Debian install python3-venv" >&2
    exit 2
  fi
  install=(.venv/bin/python -m pip install -qq --disable-pip-version-check)
  "${install[@]}" --constraint scripts/constraints.txt hatchling editables
  "${install[@]}" --constraint scripts/constraints.txt --no-build-isolation --editable '.[dev]'
  echo "$wanted" > "$stamp"
fi

PATH="$ROOT/.venv/bin:$PATH"
export PATH
