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
    ok = bad = left = 0
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
/^# (pass|fail|skipped) [0-9]+$/ {
    if ($2 == "pass")
        ok += $3
    else if ($2 == "fail") {
        for (i = 0; i < $3; i++)
            print "failed\t" test " (browser)"
        bad += $3
    } else
        for (i = 0; i < $3; i++)
            missed(why)
    next
}
/^ *(# )?[Ss]kip(ped)?[: ]/ || /# SKIP/ { why = $0; sub(/^.*[Ss](kip|KIP)(ped)?:? */, "", why) }
END { settle() }
