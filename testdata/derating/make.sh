#!/usr/bin/env bash
# Makes the sweeps of the hand-computed cases again: exact impedances without
# noise of circuits with round values.
set -euo pipefail
cd "$(dirname "$0")"
go build -o /tmp/realpart-derating ../../cmd/realpart
simulate() { /tmp/realpart-derating simulate --from 100Hz --to 10MHz --points 31 "$@"; }

simulate --circuit 'ESR + ESL + C' --set ESR=50mOhm --set ESL=10nH --set C=100uF --out fifty.csv
simulate --circuit 'ESR + C + (R1 || C1)' --set ESR=10mOhm --set C=470uF --set R1=40mOhm --set C1=20uF --out branch.csv
for r in 20 22 24; do
  simulate --circuit 'ESR + ESL + C' --set ESR=${r}mOhm --set ESL=10nH --set C=100uF --out lot/part-$r.csv
done
simulate --circuit 'ESR + ESL + C' --set ESR=40mOhm --set ESL=10nH --set C=100uF --out cold.csv
simulate --circuit 'ESR + ESL + C' --set ESR=20mOhm --set ESL=10nH --set C=100uF --out warm.csv
simulate --circuit 'DCR + (L || Rp)' --set DCR=30mOhm --set L=22uH --set Rp=2kOhm --out choke.csv
rm /tmp/realpart-derating
