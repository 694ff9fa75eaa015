#!/usr/bin/env bash
# The demonstration, from a bare checkout: installs what is missing, then fires the fruit sorter to a verdict.
source "$(dirname "${BASH_SOURCE[0]}")/../tests/setup.sh"

board=netlists/fruit-sorter
# The rush is meant to break limits: exit status 1 is its right answer.
"$BOARDSIM" fire "$board/board.toml" "$board/patterns/rush.toml" --out out/demo/rush || [ $? -eq 1 ]
printf '\n\n'
"$BOARDSIM" fire "$board/board.toml" "$board/patterns/steady.toml" --out out/demo/steady
printf '\nThe steady pattern keeps every limit; the rush above breaks some and says which. Pictures: %s and %s\n' \
    out/demo/rush/overview.png out/demo/steady/overview.png
