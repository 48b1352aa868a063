#include "detect/fade.h"

#include <math.h>
#include <stdlib.h>
#include <string.h>

#define SHOT_RATIO     1.06
#define ALIVE_DB       (10 + 2.5) /* over the noise's log mean: this bin rings */
#define SURE_DB        (15 + 2.5) /* the same while there is no line to look at */
#define USED_DB        (5 + 2.5)  /* points of a decay line stand this far over it */
#define MATTERS_DB     45.0       /* below the strongest bin at the onset: too weak to wait for */
#define DUE            7.0        /* time constants: costs 0.01 % of what the record can tell */
#define SUNK           3.5 /* times as long as it stood over the noise: the same for weak ones */
#define NEPER_DB       8.685889638065036
#define RESTLESS_DB    3.0 /* scatter of a line through noise; a tone's is less */
#define DRIFT_DB_PER_S 0.4 /* the noise may have grown since the onset */
#define DRIFT_MOST_DB  6.0

bool fade_init(struct fade *fade, const struct bank *bank)
{
    fade->rate_hz = bank->rate_hz;
    fade->lanes = bank->lanes;
    fade->shots = calloc(FADE_SHOTS * bank->lanes, sizeof *fade->shots);
    fade->noise = calloc(bank->lanes, sizeof *fade->noise);
    fade->hold_s = calloc(bank->lanes, sizeof *fade->hold_s);
    return fade->shots != NULL && fade->noise != NULL && fade->hold_s != NULL;
}

void fade_done(struct fade *fade)
{
    free(fade->shots);
    free(fade->noise);
    free(fade->hold_s);
    memset(fade, 0, sizeof *fade);
}

void fade_start(struct fade *fade, double onset)
{
    fade->onset = onset;
    fade->shot_count = 0;
    fade->hold_max_s = 0;
    fade->strongest_per_s = 0;
    fade->top = 0;
    memset(fade->hold_s, 0, fade->lanes * sizeof *fade->hold_s);
}

/* Straight line through a bin's level in dB over the last factor of three in
 * time. */
struct line {
    unsigned points;
    double decay_per_s;
    double scatter_db;
};

static struct line fit_line(const struct fade *fade, size_t lane, double now_s)
{
    double n = 0, st = 0, sl = 0, stt = 0, stl = 0, sll = 0;
    unsigned kept = fade->shot_count < FADE_SHOTS ? fade->shot_count : FADE_SHOTS;
    for (unsigned i = 0; i < kept; i++) {
        double t = fade->shot_s[i];
        double over = (fade->shots[i * fade->lanes + lane] - fade->noise[lane]) / BANK_STEPS_PER_DB;
        if (t < now_s / 3 || over < USED_DB)
            continue;
        n += 1;
        st += t;
        sl += over;
        stt += t * t;
        stl += t * over;
        sll += over * over;
    }
    struct line line = {.points = (unsigned)n};
    double spread = n * stt - st * st;
    if (n < 3 || spread <= 0)
        return line;
    double slope = (n * stl - st * sl) / spread;
    double rest = (sll - sl * sl / n) - slope * slope * spread / n;
    line.decay_per_s = -slope / NEPER_DB;
    line.scatter_db = rest > 0 ? sqrt(rest / n) : 0;
    return line;
}

/* How long this bin, which stands over the noise now, asks to go on. */
static double hold_of(const struct fade *fade, size_t lane, double now_s, int level,
                      const struct line *line)
{
    if (fade->shot_count < 4)
        return level - fade->noise[lane] < bank_steps(SURE_DB) ? 0 : SUNK * now_s;
    if (line->points < 3)
        return 0;
    double fallen = line->decay_per_s * now_s;
    if (fallen < 0.7 && line->scatter_db > RESTLESS_DB)
        return 0;
    double at_onset = level + (fallen > 0 ? fallen * NEPER_DB * BANK_STEPS_PER_DB : 0);
    if (at_onset < fade->top - MATTERS_DB * BANK_STEPS_PER_DB)
        return 0;
    double due = fallen > 0 ? DUE / line->decay_per_s : (double)INFINITY;
    return fmin(due, SUNK * now_s);
}

static void follow(struct fade *fade, const int16_t *row, size_t bins, double now_s)
{
    const int alive = bank_steps(ALIVE_DB + fmin(DRIFT_DB_PER_S * now_s, DRIFT_MOST_DB));
    int strongest = 0;
    for (size_t k = 1; k + 1 < bins; k++)
        fade->top = row[k] > fade->top ? row[k] : fade->top;
    for (size_t k = 1; k + 1 < bins; k++) {
        if (row[k] - fade->noise[k] < alive || (k > 1 && row[k] < row[k - 1]) ||
            row[k] < row[k + 1])
            continue;
        struct line line = fit_line(fade, k, now_s);
        fade->hold_s[k] = (float)hold_of(fade, k, now_s, row[k], &line);
        if (row[k] > strongest && line.points >= 3) {
            strongest = row[k];
            fade->strongest_per_s = line.decay_per_s;
        }
    }
    float longest = 0;
    for (size_t k = 1; k + 1 < bins; k++)
        longest = fade->hold_s[k] > longest ? fade->hold_s[k] : longest;
    fade->hold_max_s = (double)longest;
}

void fade_push(struct fade *fade, const struct bank *bank, int64_t frame, double guard_s)
{
    double end = (double)frame * (double)bank->hop, length = (double)bank->length;
    if (end - length < fade->onset + guard_s * fade->rate_hz)
        return;
    double now_s = (end - length / 2 - fade->onset) / fade->rate_hz;
    if (fade->shot_count > 0 &&
        now_s < SHOT_RATIO * fade->shot_s[(fade->shot_count - 1) % FADE_SHOTS])
        return;
    const int16_t *row = bank_row(bank, frame);
    unsigned slot = fade->shot_count % FADE_SHOTS;
    memcpy(fade->shots + slot * fade->lanes, row, fade->lanes * sizeof *row);
    fade->shot_s[slot] = now_s;
    fade->shot_count++;
    follow(fade, row, bank->bins, now_s);
}
