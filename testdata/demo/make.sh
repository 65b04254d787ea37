#!/usr/bin/env bash
# Makes the demo sweeps again. They are invented: simulated parts of a
# river-gauge telemetry station, see README.md beside this file.
set -euo pipefail
cd "$(dirname "$0")"
go build -o /tmp/realpart-demo ../../cmd/realpart
simulate() { /tmp/realpart-demo simulate "$@"; }

simulate --circuit cap-two-branch --set C=452uF --set ESR=31mOhm --set ESL=14nH --set R1=58mOhm --set C1=240uF \
  --from 100Hz --to 10MHz --points 201 --noise 0.1% --seed 1 --out electrolytic.csv
simulate --circuit cap-loss --set C=9.1uF --set tand=0.021 --set ESR=3.2mOhm --set ESL=0.85nH \
  --from 100Hz --to 30MHz --points 201 --noise 0.1% --seed 2 --out ceramic.csv
simulate --circuit cap-esr-esl --set C=0.99uF --set ESR=9.4mOhm --set ESL=13nH \
  --from 10kHz --to 30MHz --points 201 --noise 0.1% --seed 3 --out film.csv
simulate --circuit ind-core --set DCR=62mOhm --set L=46.2uH --set Rp=8.3kOhm --set Cp=9.6pF \
  --from 100Hz --to 30MHz --points 201 --noise 0.1% --seed 4 --out choke.csv
simulate --circuit bead --set DCR=0.14Ohm --set L=1.55uH --set R=590Ohm --set C=1.1pF \
  --from 100kHz --to 1GHz --points 201 --noise 0.2% --seed 5 --out bead.csv
simulate --circuit res-series-l --set R=99.6mOhm --set L=2.9nH \
  --from 1kHz --to 10MHz --points 101 --noise 0.2% --seed 6 --out resistor.csv
rm /tmp/realpart-demo
