#!/bin/sh
# Puts the routing engine that routes are checked against into an environment of its own: its
# wheels are for Python 3.12 and later. Without one, or without network, those checks are skipped.
set -u
folder=.venv-engine
test -x "$folder/bin/python" && exec "$folder/bin/python" -c "import osrm"
roots=$(command -v pyenv > /dev/null && pyenv root)
for python in python3.14 python3.13 python3.12 "${roots:-/nowhere}"/versions/3.1[2-9]*/bin/python; do
  "$python" -c 'import sys; sys.exit(sys.version_info < (3, 12))' > /dev/null 2>&1 || continue
  echo "building the environment of the routing engine in $folder (once)"
  "$python" -m venv "$folder" &&
    "$folder/bin/python" -m pip install --quiet --disable-pip-version-check osrm-bindings==26.10.0 &&
    "$folder/bin/python" -c "import osrm" && exit
  rm -rf "$folder"
done
echo "no Python 3.12 with osrm-bindings 26.10: the checks against a routing engine are skipped"
