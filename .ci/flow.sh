#!/usr/bin/env bash
# Imports run one way. Each package may import only packages that stand before it in this list; cmd sees all.
set -eu
cd "$(dirname "$0")/.."
order="fit/doubledouble fit/figures fit/parallel fit/tail fit/pretest fit/equation fit/dataset fit/folds fit/reduction fit/design fit/linear fit/collinear fit/sandwich remedy compare web-output/view web-output/chart web-output/paper web-output/page cmd/modelmend cmd/modelmend/demo/generate"
place() {
  local i=0 p
  for p in $order; do
    i=$((i + 1))
    [ "$p" = "$1" ] && { echo "$i"; return; }
  done
  echo 0
}
fault=0
check() { # importer, imported
  local a b
  a=$(place "$1"); b=$(place "$2")
  if [ "$a" = 0 ] || [ "$b" = 0 ]; then
    echo "flow: $1 -> $2: not in the list of .ci/flow.sh; give the new package its place there"; fault=1
  elif [ "$b" -ge "$a" ]; then
    echo "flow: $1 imports $2, which stands after it"; fault=1
  fi
}
if [ "${1:-}" = "--self-test" ]; then
  check fit/linear compare >/dev/null
  [ "$fault" = 1 ] || { echo "flow: the self-test was not caught"; exit 1; }
  echo "flow: a planted fault is caught"
  exit 0
fi
edges=$(go list -f '{{$p := .ImportPath}}{{range .Imports}}{{$p}} {{.}}{{"\n"}}{{end}}' ./... | grep ' modelmend/' | sed 's#modelmend/##g')
while read -r from to; do
  check "$from" "$to"
done <<<"$edges"
others=$(go list -f '{{$p := .ImportPath}}{{range .Imports}}{{$p}} {{.}}{{"\n"}}{{end}}' ./... | grep 'go-echarts' | grep -v '^modelmend/web-output/chart ' || true)
[ -z "$others" ] || { echo "flow: only web-output/chart imports go-echarts: $others"; fault=1; }
factorisations=$(grep -rlE 'mat\.(SVD|Cholesky|QR|LU|Eigen)' --include='*.go' . | grep -v -E '^./fit/linear/|_test.go' || true)
[ -z "$factorisations" ] || { echo "flow: only fit/linear factorises: $factorisations"; fault=1; }
[ "$fault" = 0 ] || exit 1
echo "flow: $(wc -l <<<"$edges") import edges run one way"
