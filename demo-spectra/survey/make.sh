#!/bin/sh
# Makes the invented survey of this folder again: sh demo-spectra/survey/make.sh, with inrush on the path.
# 23 clumps are drawn as a sample; the last one is a pair whose lines are lost in the noise. What is given of the
# clumps, properties.csv, is invented and stays as it is.
set -eu
cd "$(dirname "$0")"
work=$(mktemp -d)
trap 'rm -rf "$work"' EXIT

inrush simulate sample --out "$work/drawn" --pairs 23 --seed 4 --quiet \
    --kinds infall=13,static=5,expansion=3,two-clouds=2 --models hill --v-in-sigmas=-0.7,0.9 --tau 2,12 \
    --sigma-km-s 0.4,0.9 --temperature-k 10,25 --separation-sigmas 2.5,3.5 \
    --channels 100 --channel-sigmas 0.2,0.22 --signal-to-noise 15,60 --signal-to-noise-thin 12,40
inrush simulate pair --out "$work/lost" --seed 4 --quiet --signal-to-noise 1.5 --signal-to-noise-thin 1

rm -rf spectra
mkdir spectra
number=0
while [ $number -lt 24 ]; do
    number=$((number + 1))
    two=$(printf %02d $number)
    for line in thick thin; do
        from="$work/drawn/spectra/0000/pair-00000$two-$line.csv"
        [ $number -lt 24 ] || from="$work/lost/$line.csv"
        # two decimals of a millikelvin and of a metre a second are enough
        awk -F, -v OFS=, '/^[0-9-]/ {printf "%.5f,%.5f\n", $1, $2; next} {print}' "$from" |
            sed "s/pair-00000$two/Boat $two/" > "spectra/boat-$two-$line.csv"
    done
done

awk -F, -v OFS=, '
    NR == 1 {print "id,thick_file,thin_file,thick_line,thin_line", substr($0, 4); next}
    {
        two = substr($1, 6)
        print $1, "spectra/boat-" two "-thick.csv", "spectra/boat-" two "-thin.csv", "HCO+ 1-0,H13CO+ 1-0", substr($0, length($1) + 2)
    }' properties.csv > sample.csv
{
    sed 's/^pair-00000/Boat /' "$work/drawn/truth.csv" | cut -d, -f1-2,5-8
    echo "Boat 24,undetected,,,,"
} > truth.csv
