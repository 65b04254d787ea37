#!/bin/bash
# Measures realpart beside what a user would script instead, in one run, in
# turn: SciPy and lmfit, a C program with cminpack and a derivative by hand, a
# fused C kernel written for each circuit (the practical limit), C read and
# strtod, and encoding/csv with ParseFloat. Prints medians and their ratios.
#
#   testdata/peers/run.sh [ROUNDS=5] [FILES=200] [WORK=a new folder]
#
# Installs what is missing of Debian's gcc, pkg-config, libcminpack-dev,
# python3-numpy, python3-scipy and python3-lmfit, for which it must run as root.
# Takes about two minutes a round. The sweeps stay in WORK/data.
set -euo pipefail
here=$(cd "$(dirname "$0")" && pwd)
rounds=${1:-5} files=${2:-200} work=${3:-$(mktemp -d)}
missing=()
for p in gcc pkg-config libcminpack-dev python3-numpy python3-scipy python3-lmfit; do
  dpkg -s "$p" >/dev/null 2>&1 || missing+=("$p")
done
if [ ${#missing[@]} -gt 0 ]; then
  apt-get update -q && DEBIAN_FRONTEND=noninteractive apt-get install -y -q --no-install-recommends "${missing[@]}"
fi
export OPENBLAS_NUM_THREADS=1 OMP_NUM_THREADS=1
python=/usr/bin/python3 data=$work/data
mkdir -p "$data"
flags="-O3 -march=native -fopenmp-simd -Wall -std=gnu11"
gcc $flags -o "$work/fit_c" "$here/fit_c.c" $(pkg-config --cflags --libs cminpack) -lm
gcc $flags -o "$work/parse_c" "$here/parse_c.c"
(cd "$here/../.." && go build -o "$work/realpart" ./cmd/realpart && go test -c -o "$work/realpart.test" ./cmd/realpart)
[ -f "$data/big.csv" ] || $python "$here/gen.py" "$data" "$files"

out=$work/all.jsonl
: >"$out"
declare -A expression=([A]="R + L + C" [B]="L + R + C + (R1 || C1)" [C]="(R + L) || Cp || Rp")
# The benchmarks print lines of JSON beside the usual ones.
bench() { REALPART_PEERS=$data "$work/realpart.test" -test.run '^$' -test.bench "^BenchmarkPeers\$/^$1\$" -test.benchtime 1x -test.cpu 1 | grep '^{' || true; }
for _ in $(seq "$rounds"); do
  "$work/fit_c" timing "$data" "$files"
  bench fit
  $python "$here/fit_scipy.py" "$data" "$files"
  "$work/fit_c" micro "$data" "fused C"
  bench evaluate
  "$work/parse_c" "$data/big.csv"
  bench read
  for c in A B C; do
    $python "$here/wall.py" "C cminpack given its starts, 1 process" $c "$work/fit_c" batch "$data" $c "$files" 1
    $python "$here/wall.py" "realpart, circuit named" $c "$work/realpart" fit "$data/$c"/[0-9]*.csv --circuit "${expression[$c]}" --json
    $python "$here/wall.py" "SciPy lm, 2 processes" $c $python "$here/batch_scipy.py" "$data" $c "$files" 2 lm
  done
  $python "$here/wall.py" "realpart --version" - "$work/realpart" --version
  $python "$here/wall.py" "realpart fit of one file" - "$work/realpart" fit "$data/A/000.csv"
done >>"$out"
$python "$here/table.py" "$out" "$files"
echo
echo "Accuracy, with the same program:"
(cd "$here/../.." && go test ./fit/lm -run 'TestNIST$' -v | grep -E 'least|^ok' | sed 's/^ *[a-z_]*.go:[0-9]*: /NIST StRD digits (parameters, deviations, sum of squares), steps: /'
  PARTS=${PARTS:-100} go test ./fit -run 'TestRecovery$|TestChoice$|TestCoverage$|TestRaceMissesNothing$' -v |
    grep -E 'covered in|of [0-9]+ missed|circuit chosen in|taken for|^ok|FAIL' | sed 's/^ *[a-z_]*.go:[0-9]*: //')
