#!/usr/bin/env bash
# Takes the C program out of README.md, compiles it against an installed Wane by pkg-config alone,
# and has it read a ring whose frequency and Q are known.
#   readme_example.sh BUILD [PREFIX]    PREFIX: an installed tree; without, BUILD is installed for this
set -eu
build=$1
root=$(cd -- "$(dirname -- "${BASH_SOURCE[0]}")/../.." && pwd)
work=$(mktemp -d)
trap 'rm -rf "$work"' EXIT
prefix=${2:-$work/prefix}
[ -d "$prefix/include" ] || cmake --install "$build" --prefix "$prefix" >"$work/install.log"

awk '/^```c$/ { inside = 1; next } /^```$/ { inside = 0 } inside' "$root/README.md" >"$work/example.c"
[ -s "$work/example.c" ] || { echo "README.md holds no C example"; exit 1; }

PKG_CONFIG_PATH=$(dirname "$(find "$prefix" -name wane.pc | head -1)")
export PKG_CONFIG_PATH
# Words of pkg-config may hold escaped blanks: xargs reads them as a shell would.
mapfile -t words < <(pkg-config --cflags --libs wane | xargs -n1)
"${CC:-cc}" -std=c11 -Wall -Wextra -Werror -o "$work/example" "$work/example.c" "${words[@]}"

# 880 Hz, decay 2.2 /s: Q = pi f_n / alpha = 1256.64; noise 60 dB below, onset at 1 s, as raw floats.
awk 'BEGIN {
    srand(1); rate = 48000; f = 880; decay = 2.2; tau = 6.283185307179586
    for (n = 0; n < 4 * rate; n++) {
        t = n / rate - 1
        x = 0.0005 * sqrt(-2 * log(1 - rand())) * cos(tau * rand())
        if (t >= 0) x += 0.5 * exp(-decay * t) * cos(tau * f * t)
        printf "%.7f\n", x
    }
}' >"$work/ring.txt"
cat >"$work/floats.c" <<'C'
#include <stdio.h>
int main(void)
{
    float x;
    while (scanf("%f", &x) == 1)
        fwrite(&x, sizeof x, 1, stdout);
    return 0;
}
C
"${CC:-cc}" -o "$work/floats" "$work/floats.c"
"$work/floats" <"$work/ring.txt" | "$work/example" | tee "$work/said.txt"
awk '{ f = $1; q = $4; good = $NF == "good"; n++ }
END {
    if (n != 1 || !good || f < 879.999 || f > 880.001 || q < 1255 || q > 1258.3) {
        print "expected one good strike of 880.000 +- 0.001 Hz, Q 1256.6 +- 1.6"
        exit 1
    }
}' "$work/said.txt"
