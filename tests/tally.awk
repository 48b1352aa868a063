# Counts the cases in ctest's LastTest.log: prints "passed<TAB>N", "failed<TAB>NAME", "skipped<TAB>WHY"
# lines. See ctest_in in tests/run.
function settle()
{
    if (test == "")
        return
    if (verdict ~ /^Test Passed/) {
        if (ok + bad + left == 0)
            ok = 1
    } else if (verdict ~ /[Ss]kip/) {
        if (left == 0)
            missed(why == "" ? "no reason given" : why)
    } else if (bad == 0)
        print "failed\t" test " (" (verdict == "" ? "did not end" : verdict) ")"
    print "passed\t" ok
    test = ""
}

function missed(reason)
{
    left++
    print "skipped\t" test ": " reason
}

/^[0-9]+\/[0-9]+ Testing: / {
    settle()
    test = $3
    ok = bad = left = named = gap = 0
    running = why = verdict = ""
    is_output = 0
    next
}
/^Output:$/ { is_output = 1; next }
/^<end of output>$/ { is_output = 0; next }
!is_output && /^Test (Passed|Failed|Pass|Skipped|Timeout)/ { verdict = $0 }
!is_output && /^Skip regular expression|^Test Skipped|SKIP_RETURN_CODE/ { verdict = "Skipped" }
!is_output { next }
/^\[ RUN      \] / { running = $4; why = ""; next }
/^\[       OK \] / && $4 == running { ok++; running = ""; next }
/^\[  FAILED  \] / && $4 == running { bad++; print "failed\t" test " " running; running = ""; next }
/^\[  SKIPPED \] / && $4 == running { missed(running (why == "" ? "" : ": " why)); running = ""; next }
# node's TAP: names as they come, counts at its end.
/^not ok [0-9]+ - / && !/# SKIP/ { name = $0; sub(/^not ok [0-9]+ - /, "", name); names[++named] = name; next }
/^ok [0-9]+ - .*# SKIP/ { name = $0; sub(/^ok [0-9]+ - /, "", name); sub(/# SKIP */, "", name); gaps[++gap] = name; next }
/^# pass [0-9]+$/ { ok += $3; next }
/^# fail [0-9]+$/ {
    for (i = 1; i <= $3; i++)
        print "failed\t" test " " (i <= named ? names[i] : "")
    bad += $3
    next
}
/^# skipped [0-9]+$/ {
    for (i = 1; i <= $3; i++)
        missed(i <= gap ? gaps[i] : why)
    next
}
/^ *(# )?[Ss]kip(ped)?[: ]/ || /# SKIP/ { why = $0; sub(/^.*[Ss](kip|KIP)(ped)?:? */, "", why) }
END { settle() }
