#include "wane/sentence.h"

#include <math.h>

/* Milliseconds below a second, seconds above. */
static void append_time(struct text *text, double seconds)
{
    if (seconds < 0.0095)
        text_appendf(text, "%.2g ms", seconds * 1e3);
    else if (seconds < 0.9995)
        text_appendf(text, "%.0f ms", seconds * 1e3);
    else
        text_appendf(text, "%.3g s", seconds);
}

static void append_dbfs(struct text *text, double dbfs)
{
    text_appendf(text, "%s%.0f dBFS", dbfs < -0.5 ? "\u2212" : "", fabs(dbfs));
}

/* Two values to the first decimal place at which they differ. */
static void append_pair(struct text *text, const char *unit, double early, double late)
{
    double difference = fabs(early - late);
    int decimals = difference > 0 ? (int)ceil(-log10(difference)) : 3;
    decimals = decimals < 0 ? 0 : decimals > 9 ? 9 : decimals;
    text_appendf(text, ", %.*f %s early and %.*f %s late", decimals, early, unit, decimals, late,
                 unit);
}

static void append_lost(struct text *text, const struct why *why, double rate_hz)
{
    if (isfinite(why->lost_frames) && why->lost_frames > 0) {
        text_appendf(text, "%.0f samples (", why->lost_frames);
        append_time(text, why->lost_frames / rate_hz);
        text_append(text, ") were lost in this ring");
    } else {
        text_append(text, "Samples were lost in this ring");
    }
}

/* What happened to the blow or to its record. */
static void append_event(struct text *text, enum reason reason, const struct why *why,
                         double rate_hz, bool is_tank)
{
    double when_s = reason == REASON_CLIPPED      ? why->clipped_for_s
                    : reason == REASON_DOUBLE_HIT ? why->after_s
                                                  : why->cut_s;
    const char *before = " at ";
    const char *after = "";
    if (reason == REASON_SAMPLES_LOST) {
        append_lost(text, why, rate_hz);
        return;
    }
    if (reason == REASON_CLIPPED) {
        text_append(text, "The input clipped");
        before = " for ";
    } else if (reason == REASON_DOUBLE_HIT) {
        text_append(text, is_tank ? "The contact bounced" : "A second blow came");
        before = is_tank ? " after " : " ";
        after = is_tank ? "" : " after the first";
    } else {
        text_append(text, is_tank ? "The next switching" : "The next tap");
        text_append(text, " cut this ring short");
    }
    if (isfinite(when_s)) {
        text_append(text, before);
        append_time(text, when_s);
        text_append(text, after);
    }
}

/* What is wrong with the ring itself as a record of free decay. */
static void append_departure(struct text *text, enum reason reason, const struct why *why)
{
    if (reason == REASON_NOT_EXPONENTIAL) {
        text_append(text, why->early_per_s < why->late_per_s ? "The decay quickens as it fades"
                                                             : "The decay slows as it fades");
        if (isfinite(why->early_per_s) && isfinite(why->late_per_s))
            append_pair(text, "/s", why->early_per_s, why->late_per_s);
    } else if (reason == REASON_GLIDING) {
        text_append(text, "The frequency moves during the ring");
        if (isfinite(why->early_hz) && isfinite(why->late_hz))
            append_pair(text, "Hz", why->early_hz, why->late_hz);
    } else if (reason == REASON_INPUT_STEERED) {
        text_append(text, "The level is being steered by the input");
        if (isfinite(why->gain_db))
            text_appendf(text, ", by %.1f dB", fabs(why->gain_db));
    } else {
        text_append(text, "More modes");
        if (isfinite(why->near_hz))
            text_appendf(text, " near %.4g Hz", why->near_hz);
        text_append(text, " than this ring can tell apart");
    }
}

static void append_seen(struct text *text, enum reason reason, const struct why *why,
                        double rate_hz, bool is_tank)
{
    switch (reason) {
    case REASON_NOISY:
        text_append(text, "The noise is too high for this ring");
        if (isfinite(why->noise_dbfs)) {
            text_append(text, ", ");
            append_dbfs(text, why->noise_dbfs);
        }
        break;
    case REASON_TOO_SOFT:
        if (isfinite(why->over_noise_db))
            text_appendf(text, "Only %.0f dB above the noise", why->over_noise_db);
        else
            text_append(text, "Hardly above the noise");
        break;
    case REASON_TOO_SHORT:
        if (isfinite(why->cycles) && why->cycles < 20)
            text_appendf(text, "It rang for only %.2g cycles", why->cycles);
        else
            text_append(text, "The record ends before the ring has faded");
        break;
    case REASON_NOT_A_RING:
        text_append(text, is_tank ? "A step without a ring" : "A thump without a tone");
        if (isfinite(why->unexplained))
            text_appendf(text, " (%.0f %% of it fits no decaying mode)", 100 * why->unexplained);
        break;
    case REASON_NOT_EXPONENTIAL:
    case REASON_GLIDING:
    case REASON_INPUT_STEERED:
    case REASON_UNRESOLVED:
        append_departure(text, reason, why);
        break;
    default:
        append_event(text, reason, why, rate_hz, is_tank);
        break;
    }
}

/* What to change: struck part, tank. NULL: the same for both. */
static const char *const advice[REASON_COUNT][2] = {
    [REASON_SAMPLES_LOST] = {"close other programs, or choose a longer buffer", NULL},
    [REASON_CLIPPED] = {"move the microphone back or tap softer", "divide the signal down further"},
    [REASON_DOUBLE_HIT] = {"let the mallet bounce away", "use a faster switch"},
    [REASON_RESTRUCK] = {"wait longer between taps", "switch less often"},
    [REASON_NOISY] = {"tap again when it is quiet, or bring the microphone closer",
                      "shorten or screen the lead"},
    [REASON_TOO_SOFT] = {"tap harder, or bring the microphone closer",
                         "divide the signal down less"},
    [REASON_TOO_SHORT] = {"free the part from its rest, or let it ring to its end",
                          "take the load off the tank"},
    [REASON_NOT_A_RING] = {"if that was the part, tap with something harder",
                           "check that the coil and the capacitor are joined"},
    [REASON_NOT_EXPONENTIAL] = {"tap softer, or look for something that touches the part",
                                "drive it less; a core or a diode may be in play"},
    [REASON_GLIDING] = {"tap softer, or let the part come to the room's temperature",
                        "drive it less; a core may be near saturation"},
    [REASON_INPUT_STEERED] = {"switch its gain control and noise suppression off", NULL},
    [REASON_UNRESOLVED] = {"let it ring longer, or tap a quarter turn away", "let it ring longer"},
};

void sentence_append(struct text *text, const struct reading *reading, double rate_hz,
                     enum sentence_body body)
{
    bool is_first = true;
    bool has_others = false;
    for (unsigned i = 0; i < REASON_COUNT; i++) {
        if ((reading->reasons & (1U << i)) == 0)
            continue;
        if (is_first) {
            const char *change = advice[i][body == SENTENCE_TANK && advice[i][1] != NULL];
            append_seen(text, (enum reason)i, &reading->why, rate_hz, body == SENTENCE_TANK);
            text_appendf(text, ": %s.", change);
            is_first = false;
            continue;
        }
        text_appendf(text, "%s %s", has_others ? "," : " Also:", reason_name((enum reason)i));
        has_others = true;
    }
    if (has_others)
        text_append(text, ".");
}
