#!/bin/sh
# Every test has a time limit, of ten minutes at most, and a label.
build=$1
list=$build/house-tests.json
ctest --test-dir "$build" --show-only=json-v1 >"$list" || exit 1
ask() {
    sqlite3 :memory: "
        CREATE TEMP TABLE test AS SELECT json_extract(value, '\$.name') AS name, json_extract(value, '\$.properties') AS properties
            FROM json_each(readfile('$list'), '\$.tests');
        CREATE TEMP VIEW property AS SELECT test.name AS test, json_extract(p.value, '\$.name') AS name,
            json_extract(p.value, '\$.value') AS value FROM test, json_each(test.properties) p;
        $1"
}
count=$(ask 'SELECT count(*) FROM test')
[ "${count:-0}" -ge 10 ] || { echo "ctest lists ${count:-no} tests"; exit 1; }
bad=$(ask "SELECT name || ': no time limit' FROM test WHERE name NOT IN (SELECT test FROM property WHERE name = 'TIMEOUT');
           SELECT test || ': ' || value || ' s' FROM property WHERE name = 'TIMEOUT' AND NOT (value > 0 AND value <= 600);
           SELECT name || ': no label' FROM test WHERE name NOT IN (SELECT test FROM property WHERE name = 'LABELS');") || exit 1
[ -z "$bad" ] || { echo "$bad"; exit 1; }
echo "$count tests, each with its limit and label"
