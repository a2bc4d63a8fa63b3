#!/usr/bin/env bash
# Builds the static library, compiles the example against it with every warning an error, and runs it.
set -euo pipefail
cd "$(dirname "$0")/.."

cargo build --quiet --package ratewright-handle-c
target="${CARGO_TARGET_DIR:-../../target}"
program="$(mktemp -d)/follow"
trap 'rm -rf "$(dirname "$program")"' EXIT

"${CC:-cc}" -std=c11 -Wall -Wextra -Wpedantic -Werror -D_POSIX_C_SOURCE=200809L -Iinclude \
    example/follow.c "$target/debug/libratewright_handle_c.a" -lpthread -ldl -lm -o "$program"
"$program"
