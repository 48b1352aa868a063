#!/usr/bin/env bash
# Includes point one way: base includes nothing of ours but its own headers; a stage includes base
# and the shared types in include/wane, never another stage. What each folder may include besides
# its own headers and the types stands in the table; anything else fails with file and line.
set -u
cd -- "$(dirname -- "${BASH_SOURCE[0]}")/.." || exit 1

types='error text strike reading sample json settings nearest sentence'
declare -A may=(
    [base]='clock queue ring'
    [input]='base input clock ring'
    [detect]='base detect'
    [fit]='base fit'
    [series]='base series part statistics constants watch gauge'
    [log]='base log series part statistics constants watch gauge clock queue tally report'
    [serve]='base serve log series part statistics constants watch gauge clock queue tally report'
    [daemon]='*'
    [cli]='*'
)

wrong=0
complain()
{
    printf '%s: %s must not include %s\n' "$1" "$2" "$3" >&2
    wrong=1
}

allowed()
{
    local word
    for word in $types ${may[$1]}; do
        [ "$word" = "$2" ] && return 0
    done
    return 1
}

while IFS=: read -r file line text; do
    folder=${file#src/}
    folder=${folder%%/*}
    [ -n "${may[$folder]+known}" ] || { printf '%s: src/%s is no folder of the plan: add it to tests/check_includes.sh\n' "$file" "$folder" >&2; wrong=1; continue; }
    [ "${may[$folder]}" = '*' ] && continue
    name=${text#*\"}
    name=${name%%\"*}
    case $name in
    wane/*)
        header=${name#wane/}
        allowed "$folder" "${header%.h}" || complain "$file:$line" "$folder" "$name"
        ;;
    */*)
        owner=${name%%/*}
        [ "$owner" = "$folder" ] || allowed "$folder" "$owner" || complain "$file:$line" "$folder" "$name"
        ;;
    *)
        [ -f "src/$folder/$name" ] || complain "$file:$line" "$folder" "$name, which is not in its folder"
        ;;
    esac
done < <(grep -rnE '^[[:space:]]*#[[:space:]]*include[[:space:]]*"' src --include='*.[ch]')

# Public headers know no folder's private ones.
while IFS=: read -r file line text; do
    complain "$file:$line" "a public header" "${text#*include }"
done < <(grep -nE '#[[:space:]]*include[[:space:]]*"' include/wane/*.h | grep -v '"wane/')

# Threads are made in one place (the keeper of the capture process has its own), and the clock is read in one.
while IFS=: read -r file line _; do
    printf '%s:%s: threads are made in src/daemon\n' "$file" "$line" >&2
    wrong=1
done < <(grep -rnE '\bpthread_create\(' src --include='*.c' | grep -vE '^src/(daemon|cli)/|^src/input/capture')
while IFS=: read -r file line _; do
    printf '%s:%s: %s\n' "$file" "$line" "the measuring core reads no clock" >&2
    wrong=1
done < <(grep -rnE '\b(clock_gettime|gettimeofday|time)\((NULL|CLOCK|&)' src/detect src/fit src/series --include='*.c')

exit "$wrong"
