#!/bin/sh
# Copies a book while it is in use. Usage: backup.sh BOOK TARGET
# BOOK is the path of a SQLite file, or a postgresql:// URL; TARGET must not exist yet.
set -eu
[ $# -eq 2 ] || { echo "usage: backup.sh BOOK TARGET" >&2; exit 2; }
[ ! -e "$2" ] || { echo "backup.sh: $2 exists; give a new name" >&2; exit 2; }
case "$1" in
    postgresql://*) pg_dump --format=custom --no-owner --file="$2.part" "$1" ;;
    *)
        [ -f "$1" ] || { echo "backup.sh: no book at $1" >&2; exit 2; }
        sqlite3 "file:$1?mode=ro" "VACUUM INTO '$2.part'"
        [ "$(sqlite3 "$2.part" 'PRAGMA integrity_check')" = ok ] || { echo "backup.sh: the copy is damaged" >&2; exit 4; }
        ;;
esac
sync "$2.part"
mv "$2.part" "$2"
sha256sum "$2"
