#!/bin/sh
# Opens a netlist in headless Neovim with the shipped configuration and checks that an
# unstable-mode diagnostic appears on a line and goes away when that line is replaced.
#
#   neovim_check.sh SERVER FILE LINE TEXT [CONFIG]
#
# SERVER: path of the server binary, called as `squeg serve`. LINE counts from 1. TEXT replaces that
# line. NVIM names the editor (default: nvim in the venv beside this script, else on the PATH);
# CHECK_LIMIT_MS is the patience of each wait (default 30000).
set -eu
here=$(CDPATH= cd -- "$(dirname -- "$0")" && pwd)
if [ $# -lt 4 ] || [ $# -gt 5 ]; then
    sed -n '2,10s/^# \{0,1\}//p' "$0" >&2
    exit 2
fi
server=$(realpath -- "$1")
CHECK_FILE=$(realpath -- "$2")
CHECK_LINE=$3
CHECK_TEXT=$4
CHECK_CONFIG=$(realpath -- "${5:-$here/../../editor-configs/neovim/squeg.lua}")
export CHECK_FILE CHECK_LINE CHECK_TEXT CHECK_CONFIG
if [ -z "${NVIM:-}" ]; then
    NVIM=$here/venv/bin/nvim
    [ -x "$NVIM" ] || NVIM=nvim
fi

# The configuration calls `squeg` from the PATH; state and logs of Neovim stay out of the home.
work=$(mktemp -d)
trap 'rm -rf "$work"' EXIT
ln -s "$server" "$work/squeg"
export PATH="$work:$PATH" XDG_STATE_HOME="$work" XDG_DATA_HOME="$work" XDG_CACHE_HOME="$work" XDG_CONFIG_HOME="$work"

status=0
timeout 120 "$NVIM" --headless --clean -n -c "luafile $here/neovim_check.lua" || status=$?
if [ "$status" -ne 0 ] && [ -f "$work/nvim/lsp.log" ]; then
    tail -n 20 "$work/nvim/lsp.log" >&2
fi
exit "$status"
