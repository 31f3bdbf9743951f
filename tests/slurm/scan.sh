#!/usr/bin/env bash
# A scan on a real two-node cluster: a job array over both nodes, one node killed in the middle, the merge, compared with the
# same scan run here.
#   scan.sh PROGRAM [DIR]      about two minutes; brings the cluster up and takes it down; needs root once, to install Slurm
set -euo pipefail
here=$(cd "$(dirname "$0")" && pwd)
program=$(realpath "$1")
dir=${2:-$(mktemp -dt slurm.XXXX)}
work=$(mktemp -dt slurm-scan.XXXX)
finish() { status=$?; "$here/down.sh" "$dir" || status=1; rm -rf "$work"; exit $status; }
trap finish EXIT
start=$SECONDS
say() { printf '%3d s  %s\n' $((SECONDS - start)) "$*"; }
fail() {
    say "FAILED: $*"
    . "$dir/env"; squeue -a >&2 || true; sinfo >&2 || true
    tail -n 20 "$work"/map/jobs/*.log >&2 || true
    exit 1
}
await() { # await SECONDS WHAT COMMAND...
    local until=$((SECONDS + $1)) what=$2; shift 2
    until "$@"; do [ $SECONDS -lt $until ] || fail "no $what"; sleep 0.5; done
}
"$here/up.sh" "$dir" >/dev/null; say "up"
. "$dir/env"
cd "$work"
# every part stops by itself after some seconds and goes back into the queue: requeue is tested as well
cat >map.yaml <<'Y'
format: 1
title: Length and factor of a shaped pulse
numbers:
  bend: -220 MHz
  factor: 0
  length: 11 ns
system:
  ladder: {levels: 3, first_gap: 5.3 GHz, anharmonicity: bend, couplings_grow: sqrt}
drives:
  xy: {acts_on: ladder, reference_pair: [0, 1], carrier: 5.3 GHz}
envelopes:
  bump: {shape: raised cosine, length: length, turn: 180 deg, derivative: {factor: factor, against: bend}}
sequence:
  - pulse: {drive: xy, envelope: bump, turn_about: x}
start: 0
frame: {kind: rotating, follows: drives, drop_terms_faster_than: 2 GHz}
record:
  final: {population: [1, 2]}
scan:
  axes:
    - {number: length, from: 8 ns, to: 200 ns, points: 120}
    - {number: factor, from: 0, to: 1, points: 160}
run: {split_into: 6, threads: 1}
accuracy: {final: 1e-9}
Y
"$program" scan map.yaml --folder map --scheduler slurm
both() { [ "$(squeue -h -t running -o %N | sort -u | wc -l)" -eq 2 ]; }
await 30 "use of both nodes" both; say "both nodes work"
begun() { [ "$("$program" status map --json 2>/dev/null | grep -m1 '"stored"' | tr -dc 0-9)" -gt 0 ]; }
await 30 "first points" begun
"$here/node.sh" "$dir" kill n2; say "n2 killed with its job"
"$program" status map | head -3
merged() { [ -e map/result.json ]; }
await 240 "merged result" merged; say "merged on what was left"
"$program" scan map.yaml --folder here --quiet
cmp map/scan.csv here/scan.csv || fail "the table of the cluster differs"
grep -q '"failed": 0' map/result.json || fail "points failed"
ls map | grep -q '\.store$' && fail "stores were left"
say "the table is the same to the byte as that of one machine"
say "passed"
