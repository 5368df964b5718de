#!/bin/sh
# Makes all of runs/ anew: the trajectories of five libraries, their manifest and their certified errors.
#
# Run:    sh make_all.sh                 (half a minute; PYTHON=/path/to/python3 picks the Python)
# Needs:  apt-get install gcc g++ libgsl-dev libboost-dev octave r-base-core r-cran-desolve
#         pip install scipy python-flint         with Python 3.11 or later
# Octave 7.3 may print "ignoring const execution_exception& while preparing to exit" as it ends; its status is 0 all the same.
# Another version of a library may change last digits of a file; the manifest names the version that wrote it.
set -eu
cd "$(dirname "$0")"
python=${PYTHON:-python3}
export PYTHONDONTWRITEBYTECODE=1
build=$(mktemp -d)
trap 'rm -rf "$build"' EXIT
mkdir -p runs
rm -f runs/*.csv runs/*.json

"$python" linear_models.py --write "$build"
"$python" make_scipy.py "$build"
cc -Wall -Wextra -O1 -ffp-contract=off -o "$build/make_gsl" make_gsl.c -lgsl -lgslcblas -lm
"$build/make_gsl" "$build" runs
c++ -Wall -O1 -std=c++17 -ffp-contract=off -o "$build/make_odeint" make_odeint.cpp
"$build/make_odeint" "$build" runs
octave-cli --no-init-file --quiet make_octave.m "$build" runs
Rscript --vanilla make_desolve.R "$build" runs
"$python" linear_models.py --merge "$build"
"$python" make_errors.py
