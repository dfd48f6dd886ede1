#!/bin/sh
# Reruns every script of this folder and rewrites its JSON. Needs Rscript with the packages named in
# README.md, and python3 with mpmath (set PYTHON when that is another python). Run it to add cases,
# then read the difference: values that move without a change of script need an explanation.
set -eu
cd "$(dirname "$0")"
python="${PYTHON:-python3}"
write() {
  target="$1"
  shift
  "$@" > "$target.new"
  mv "$target.new" "$target"
  echo "wrote $target"
}
for script in *.py; do write "${script%.py}.json" "$python" "$script"; done
for script in *.R; do write "${script%.R}.json" Rscript "$script"; done
