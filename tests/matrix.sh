#!/usr/bin/env bash
# Run the tests against the built wheel, outside the checkout, on every supported Python found: with
# the latest dependencies on each, and with the lowest admitted ones on Python 3.11, the only one
# all of them have wheels for. Words after the script's name go to pytest.
set -euo pipefail

checkout=$(cd "$(dirname "$0")/.." && pwd)
scratch=$(mktemp -d)
trap 'rm -rf "$scratch"' EXIT

python_of() {
  local candidate
  for candidate in "python$1" "$HOME"/.pyenv/versions/"$1".*/bin/python; do
    if "$candidate" -c "import sys; sys.exit('%d.%d' % sys.version_info[:2] != '$1')" 2>/dev/null; then
      echo "$candidate"
      return
    fi
  done
}

# The dependencies of the package with every lower bound made exact.
lowest() {
  "$1" - "$checkout/pyproject.toml" <<'PY'
import re, sys, tomllib
with open(sys.argv[1], "rb") as file:
    project = tomllib.load(file)["project"]
for line in project["dependencies"]:
    print(re.sub(r">=([^,]+).*", r"==\1", line))
PY
}

mkdir "$scratch/tests"
tar -C "$checkout" --exclude=./src --exclude=./.git --exclude=./.venv --exclude=./reports/[!p]* \
  --exclude=__pycache__ -cf - . | tar -C "$scratch/tests" -xf -
# Says how the source is written; means nothing without it.
rm "$scratch/tests/tests/unit/test_house.py"

failed=()
for version in 3.11 3.12 3.13; do
  python=$(python_of "$version")
  if [ -z "$python" ]; then
    echo "== Python $version is not on this machine"
    continue
  fi
  if [ ! -d "$scratch/dist" ]; then
    "$python" -m venv "$scratch/build"
    "$scratch/build/bin/pip" install -q build
    "$scratch/build/bin/python" -m build -q --outdir "$scratch/dist" "$checkout"
  fi
  for bound in lowest latest; do
    [ "$bound" = latest ] || [ "$version" = 3.11 ] || continue
    env="$scratch/$version-$bound"
    "$python" -m venv "$env"
    pins=/dev/null
    if [ "$bound" = lowest ]; then
      pins="$scratch/lowest.txt"
      lowest "$python" >"$pins"
    fi
    echo "== Python $version, $bound dependencies"
    "$env/bin/pip" install -q -c "$pins" "$(echo "$scratch"/dist/*.whl)[test]"
    (cd "$scratch/tests" && "$env/bin/ruleout" doctor && "$env/bin/python" -m pytest "$@") ||
      failed+=("$version-$bound")
    rm -rf "$env"
  done
done
if [ ${#failed[@]} -gt 0 ]; then
  echo "== failed: ${failed[*]}"
  exit 1
fi
