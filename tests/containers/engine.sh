#!/bin/bash
# engine.sh WORK NETWORK SCRIPT: start a container engine of one's own, run SCRIPT with it, and stop it.
# It has a mount namespace of its own; NETWORK is `host`, for a build that fetches packages, or `private`: a network of its own,
# from which nothing leads out, and in which the engine makes its bridges, names and published ports as on any machine.
set -eu
W=$1 NETWORK=$2 SCRIPT=$3
if [ -z "${IN_NAMESPACE:-}" ]; then
  flags="-m --propagation private"
  [ "$NETWORK" = host ] || flags="$flags -n"
  # shellcheck disable=SC2086
  IN_NAMESPACE=1 exec unshare $flags bash "$0" "$@"
fi
export PATH=$W/dk/usr/sbin:$W/dk/usr/bin:$PATH DOCKER_CONFIG=$W/cfg DOCKER_HOST=unix://$W/d.sock
mount -t tmpfs tmpfs /run
if [ "$NETWORK" = host ]; then
  networking="--bridge=none --iptables=false --ip6tables=false --ip-forward=false --ip-masq=false --userland-proxy=false"
else
  ip link set lo up
  networking="--ip6tables=false --userland-proxy=false"
fi
mkdir -p "$W/cfg/cli-plugins" "$W/e"
ln -sf "$W/v/bin/docker-compose" "$W/cfg/cli-plugins/docker-compose"
rm -f "$W/d.sock"
# shellcheck disable=SC2086
dockerd --data-root "$W/e/data" --exec-root "$W/e/exec" --pidfile "$W/e/pid" -H "$DOCKER_HOST" $networking \
  --storage-driver "${DRIVER:-overlay2}" --oom-score-adjust 0 >"$W/dockerd-$NETWORK.log" 2>&1 &
ENGINE=$!
trap 'kill $ENGINE 2>/dev/null; wait $ENGINE 2>/dev/null || true' EXIT
for _ in $(seq 120); do
  docker version >/dev/null 2>&1 && break
  kill -0 $ENGINE || { tail "$W/dockerd-$NETWORK.log"; exit 1; }
  sleep 0.25
done
bash -euo pipefail "$SCRIPT"
