#!/bin/sh
# check-record.sh FILE: exit 0 if every line is chained and the record closed, else 1 and the line.
LC_ALL=C; export LC_ALL; bad() { echo "line $n: $1"; exit 1; }
run=$(sed -n '1s/^[^\\]*,"k":"opened","v":{"schema":"kymobench\/record\/1","run":"\([^"]*\)".*/\1/p' <"$1")
hash=$(printf 'kymobench-record/1\n%s' "$run" | sha256sum | cut -c1-64); n=0; kind=
tr '\000' '\001' <"$1" | { while n=$((n+1)); IFS= read -r line; do
  [ "$kind" != closed ] || bad "follows the closing line"
  body=${line%?????????????????????????????????????????????????????????????????}
  hash=$(printf %s%s "$hash" "$body" | sha256sum | cut -c1-64)
  [ "$line" = "$body$(printf '\t')$hash" ] || bad "hash does not match"
  case $body in "{\"n\":$n,\"d\":"*'","k":"closed","v":{"lines":'$n'}}') kind=closed;; "{\"n\":$n,\"d\":"*) kind=open;; *) bad "number is wrong";; esac
done; [ -z "$line" ] || bad "does not end"; [ "$kind" = closed ] || bad "record is not closed"; echo "run $run, $((n-1)) lines, $(($(wc -c <"$1"))) bytes, head $hash"; }
