#!/bin/sh
# Puts a copy back where no book is, then verifies it. Usage: restore.sh COPY BOOK
# For PostgreSQL, BOOK is the URL of an empty database.
set -eu
[ $# -eq 2 ] || { echo "usage: restore.sh COPY BOOK" >&2; exit 2; }
[ -f "$1" ] || { echo "restore.sh: no copy at $1" >&2; exit 2; }
case "$2" in
    postgresql://*) pg_restore --exit-on-error --no-owner --single-transaction --dbname="$2" "$1" ;;
    *)
        [ ! -e "$2" ] || { echo "restore.sh: $2 exists; move it away first" >&2; exit 2; }
        cp "$1" "$2.part"
        sync "$2.part"
        mv "$2.part" "$2"
        ;;
esac
echo "restored; now run: recon verify"
