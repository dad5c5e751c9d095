#!/bin/sh
# Every file that a page of the documentation links to, or names in backquotes as a path of the tree, is there.
build=$1
source=$2
failed=0
count=0
cd "$source" || exit 1
for page in README.md DEVELOPERS.md docs/*.md; do
    folder=$(dirname "$page")
    for link in $(grep -o '](\([^)#]*\)' "$page" | sed 's/^](//' | grep -v '^https\{0,1\}:'); do
        count=$((count + 1))
        [ -e "$folder/$link" ] || { echo "$page links to $link, which is not there"; failed=1; }
    done
    for path in $(grep -oE '`(core|bridge|gui|tests|profiles|docs)/[A-Za-z0-9_./-]*`' "$page" | tr -d '`'); do
        count=$((count + 1))
        # `core/train/segment` stands for its .c and .h
        [ -e "$path" ] || [ -e "$path.c" ] || case $path in *NAME* | *PART* | *WING*) ;; *) echo "$page names $path, which is not there"; failed=1 ;; esac
    done
done
[ "$count" -ge 30 ] || { echo "only $count links and paths were found: this check reads pages wrongly"; failed=1; }
exit $failed
