# Use the image in a deployment, from $ROOT. Beyond the machine stands another one, so that a way out would be seen to be one.
# Its address is of a block kept for documentation (RFC 5737).
ip netns add beyond
ip link add way type veth peer name home netns beyond
ip addr add 198.51.100.1/24 dev way
ip link set way up
ip netns exec beyond sh -euc 'ip addr add 198.51.100.2/24 dev home; ip link set home up; ip link set lo up'
ip netns exec beyond python3 -m http.server --directory "$W/cfg" 80 >"$W/beyond.log" 2>&1 &
BEYOND=$!
trap 'kill $BEYOND' EXIT
cd "$ROOT"
python3 -m tests.containers.acceptance
