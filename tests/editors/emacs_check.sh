#!/bin/sh
# The same check as neovim_check.sh with Emacs and eglot in batch mode.
#
#   emacs_check.sh SERVER FILE LINE TEXT
#
# EMACS names the editor (default: emacs on the PATH); extra arguments for it in EMACS_ARGS.
set -eu
here=$(CDPATH= cd -- "$(dirname -- "$0")" && pwd)
if [ $# -ne 4 ]; then
    sed -n '2,6s/^# \{0,1\}//p' "$0" >&2
    exit 2
fi
server=$(realpath -- "$1")
CHECK_FILE=$(realpath -- "$2") CHECK_LINE=$3 CHECK_TEXT=$4 CHECK_CONFIG=$here/../../editor-configs/emacs/squeg.el
export CHECK_FILE CHECK_LINE CHECK_TEXT CHECK_CONFIG
work=$(mktemp -d)
trap 'rm -rf "$work"' EXIT
ln -s "$server" "$work/squeg"
# shellcheck disable=SC2086
HOME=$work PATH=$work:$PATH timeout 120 "${EMACS:-emacs}" ${EMACS_ARGS:-} --batch -Q -l "$here/emacs_check.el"
