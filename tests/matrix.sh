#!/usr/bin/env bash
# Run the tests against the built wheel on every supported Python found, with the lowest and the
# latest admitted dependencies. Needs uv for the lowest ones; without it only the latest are run.
set -euo pipefail

checkout=$(cd "$(dirname "$0")/.." && pwd)
scratch=$(mktemp -d)
trap 'rm -rf "$scratch"' EXIT
cd "$checkout"

python3 -m venv "$scratch/build"
"$scratch/build/bin/pip" install -q build
"$scratch/build/bin/python" -m build -q --wheel --outdir "$scratch/dist" .
wheel=$(echo "$scratch"/dist/*.whl)

for version in 3.11 3.12 3.13; do
  python="python$version"
  if ! "$python" -c '' 2>/dev/null; then
    echo "== $python is not on this machine"
    continue
  fi
  for resolution in lowest-direct highest; do
    env="$scratch/$version-$resolution"
    "$python" -m venv "$env"
    if command -v uv >/dev/null; then
      uv pip install -q --python "$env/bin/python" --resolution "$resolution" "${wheel}[test]"
    elif [ "$resolution" = highest ]; then
      "$env/bin/pip" install -q "${wheel}[test]"
    else
      echo "== $python with the lowest dependencies needs uv"
      continue
    fi
    echo "== $python, $resolution dependencies"
    # What the linters say depends on their own versions, not on ours.
    "$env/bin/python" -m pytest --ignore=tests/unit/test_house.py
  done
done
