#!/usr/bin/env bash
# Judge the demos anew and keep the small part of the results in reports/published.
# Usage: mechanisms_demo/publish.sh [DEMO ...]; uses the ruleout on PATH, or $RULEOUT.
set -euo pipefail

cd "$(dirname "$0")/.."
scratch=$(mktemp -d)
trap 'rm -rf "$scratch"' EXIT
[ "$#" -gt 0 ] || set -- frost_relay spore_wake lantern_gene salt_sense

for demo in "$@"; do
  COLUMNS=80 ${RULEOUT:-ruleout} judge "mechanisms_demo/$demo" --out "$scratch/$demo"
  kept="reports/published/$demo"
  rm -rf "$kept"
  mkdir -p "$kept/figures"
  cp "$scratch/$demo"/{variants,claims,checks,parameters,findings}.csv "$kept"
  cp "$scratch/$demo"/{verdict.json,report.html,table.tex,methods.txt} "$kept"
  cp "$scratch/$demo"/figures/*.svg "$kept/figures"
done
