#include "detect/bank.h"

#include "wane/strike.h"

#include <math.h>
#include <stdlib.h>
#include <string.h>

#define BLOCK 16 /* lanes handled at once: a constant count, so that compilers use vectors */

/* Bins below this one, and the first group, see the single swings of a low ring come and go. */
#define SLOW_BINS 3

/* Rows that must lie this close over the level before the last strike, for a bin to be calm again.
 */
#define CALM_ROWS 8
#define CALM_DB   4.0

#define NEIGHBOURS 4 /* bins to each side */

#define NEVER 16383 /* a threshold no level reaches; differences of levels stay within 16 bits */

/* Each of the 32 rows gives 1/32 of its level to the sum, rounded down: half a step on average. */
#define FLOOR_SHIFT 5
#define HALF_STEP   15

/* Mean of the log of an exponential variable is 2.5 dB under the log of its
 * mean: floors are means of logs, thresholds are stated over mean power. */
#define LOG_MEAN_DB 2.5

/* Eight bins' mean log level is steadier than one bin's: measured tails of both
 * are alike where the groups' threshold is this share of the bins'. */
#define GROUP_SHARE   0.735
#define RISE_DB       9.0
#define GROUP_RISE_DB 6.0
#define CREST_DB      4.0 /* a row that later rows exceed by more is the flank of a swell */

/* 1e-6 of full scale (rms): under the noise of any converter, over what floats
 * lose. */
#define SILENCE_RMS 1e-6

static bool allocate(struct bank *bank)
{
    bank->window = fftwf_alloc_real(bank->length);
    bank->frame = fftwf_alloc_real(bank->length);
    bank->spectrum = fftwf_alloc_complex(bank->bins + BLOCK);
    bank->rows = calloc(BANK_ROWS * bank->lanes, sizeof *bank->rows);
    bank->sum = calloc(bank->lanes, sizeof *bank->sum);
    bank->young = calloc(bank->lanes, sizeof *bank->young);
    bank->floor = bank->young;
    bank->need = calloc(bank->lanes, sizeof *bank->need);
    bank->rise = calloc(bank->lanes, sizeof *bank->rise);
    return bank->window != NULL && bank->frame != NULL && bank->spectrum != NULL &&
           bank->rows != NULL && bank->sum != NULL && bank->young != NULL && bank->need != NULL &&
           bank->rise != NULL;
}

bool bank_init(struct bank *bank, size_t length, int overlap, const struct bank_settings *settings)
{
    size_t groups = length / 2 / BANK_GROUP;
    bank->length = length;
    bank->hop = length / (size_t)overlap;
    bank->near = overlap + overlap / 2;
    bank->look = 2 * overlap;
    bank->bins = length / 2 + 1;
    bank->lanes = (bank->bins + groups + BLOCK - 1) / BLOCK * BLOCK;
    bank->rate_hz = settings->rate_hz;
    if (!allocate(bank))
        return false;
    bank->plan = fftwf_plan_dft_r2c_1d((int)length, bank->frame, bank->spectrum, FFTW_ESTIMATE);
    if (bank->plan == NULL)
        return false;
    double energy = 0;
    for (size_t i = 0; i < length; i++) {
        double w = 0.5 - 0.5 * cos(2 * WANE_PI * (double)i / (double)length);
        bank->window[i] = (float)w;
        energy += w * w;
    }
    memset(bank->spectrum, 0, (bank->bins + BLOCK) * sizeof *bank->spectrum);
    bank->silence = (float)(SILENCE_RMS * SILENCE_RMS * energy);
    bank->newest = -1;
    bank_set(bank, settings);
    return true;
}

void bank_done(struct bank *bank)
{
    if (bank->plan != NULL)
        fftwf_destroy_plan(bank->plan);
    fftwf_free(bank->window);
    fftwf_free(bank->frame);
    fftwf_free(bank->spectrum);
    free(bank->rows);
    free(bank->sum);
    free(bank->young);
    free(bank->need);
    free(bank->rise);
    memset(bank, 0, sizeof *bank);
}

void bank_set(struct bank *bank, const struct bank_settings *settings)
{
    double bin_hz = bank->rate_hz / (double)bank->length;
    int need = bank_steps(settings->trigger_db + LOG_MEAN_DB);
    int group_need = bank_steps(settings->trigger_db * GROUP_SHARE);
    for (size_t i = 0; i < bank->lanes; i++)
        bank->need[i] = bank->rise[i] = NEVER;
    /* Bin 0 is real, not complex: its level wanders far more. Bin 1 shares half
     * of it. */
    for (size_t k = 1; k + 1 < bank->bins; k++) {
        double f_hz = (double)k * bin_hz;
        if (f_hz < settings->f_low_hz - bin_hz || f_hz > settings->f_high_hz)
            continue;
        bank->need[k] = (int16_t)(need + (k == 1 ? bank_steps(3) : 0));
        bank->rise[k] = (int16_t)bank_steps(RISE_DB);
    }
    for (size_t g = 0; g < bank->length / 2 / BANK_GROUP; g++) {
        double low_hz = (double)(1 + g * BANK_GROUP) * bin_hz;
        double high_hz = (double)(g + 1) * BANK_GROUP * bin_hz;
        if (low_hz < settings->f_low_hz - bin_hz || high_hz > settings->f_high_hz)
            continue;
        bank->need[bank->bins + g] = (int16_t)group_need;
        bank->rise[bank->bins + g] = (int16_t)bank_steps(GROUP_RISE_DB);
    }
}

const int16_t *bank_row(const struct bank *bank, int64_t frame)
{
    return bank->rows + (size_t)(frame & (BANK_ROWS - 1)) * bank->lanes;
}

static int16_t *row_to_fill(struct bank *bank, int64_t frame)
{
    return bank->rows + (size_t)(frame & (BANK_ROWS - 1)) * bank->lanes;
}

static void apply_window(float *restrict out, const float *restrict samples,
                         const float *restrict window, size_t count)
{
    for (size_t i = 0; i < count; i += BLOCK)
        for (size_t j = 0; j < BLOCK; j++)
            out[i + j] = samples[i + j] * window[i + j];
}

/* bins may be exceeded up to a multiple of BLOCK: both arrays are that long. */
static void spectrum_levels(int16_t *restrict row, const float *restrict spectrum, size_t bins,
                            float silence)
{
    for (size_t i = 0; i < bins; i += BLOCK) {
        float power[BLOCK];
        int32_t bits[BLOCK];
        for (size_t j = 0; j < BLOCK; j++) {
            float re = spectrum[2 * (i + j)], im = spectrum[2 * (i + j) + 1];
            power[j] = re * re + im * im + silence;
        }
        memcpy(bits, power, sizeof bits);
        for (size_t j = 0; j < BLOCK; j++)
            row[i + j] = (int16_t)(bits[j] >> 17);
    }
}

static void group_levels(int16_t *restrict row, size_t bins)
{
    const int16_t *bin = row + 1;
    for (size_t g = 0; g < (bins - 1) / BANK_GROUP; g++, bin += BANK_GROUP) {
        int sum = 0;
        for (size_t j = 0; j < BANK_GROUP; j++)
            sum += bin[j];
        row[bins + g] = (int16_t)(sum / BANK_GROUP);
    }
}

/* Whole numbers: the sum of the parts is the same whatever went in and out before. */
static void slide_floor(int16_t *restrict sum, const int16_t *restrict in,
                        const int16_t *restrict out, size_t lanes)
{
    for (size_t i = 0; i < lanes; i += BLOCK)
        for (size_t j = 0; j < BLOCK; j++)
            sum[i + j] =
                (int16_t)(sum[i + j] + (in[i + j] >> FLOOR_SHIFT) - (out[i + j] >> FLOOR_SHIFT));
}

static void grow_floor(struct bank *bank, const int16_t *row)
{
    bank->floor_count++;
    int count = (int)bank->floor_count;
    /* Few rows make an unsure floor: ask for more above it. */
    bank->doubt = bank_steps(60.0 / count - 60.0 / BANK_FLOOR);
    for (size_t i = 0; i < bank->lanes; i++) {
        bank->sum[i] = (int16_t)(bank->sum[i] + (row[i] >> FLOOR_SHIFT));
        int level = (bank->sum[i] - HALF_STEP) * BANK_FLOOR / count + HALF_STEP + bank->doubt;
        bank->young[i] = (int16_t)(level < NEVER ? level : NEVER);
    }
    bank->floor = count < BANK_FLOOR ? bank->young : bank->sum;
}

/* The row that leaves the grace of `near` hops enters the floor. */
static void move_floor(struct bank *bank)
{
    int64_t in = bank->newest - bank->look - bank->near;
    if (in < bank->first)
        return;
    if (bank->floor_count < BANK_FLOOR)
        grow_floor(bank, bank_row(bank, in));
    else
        slide_floor(bank->sum, bank_row(bank, in), bank_row(bank, in - BANK_FLOOR), bank->lanes);
}

void bank_push(struct bank *bank, const float *samples, float offset)
{
    bank->newest++;
    int16_t *row = row_to_fill(bank, bank->newest);
    apply_window(bank->frame, samples, bank->window, bank->length);
    fftwf_execute(bank->plan);
    /* A constant under a Hann window shows in bins 0 and 1 alone. */
    bank->spectrum[1][0] += offset * (float)bank->length / 4;
    spectrum_levels(row, (const float *)bank->spectrum, bank->bins, bank->silence);
    group_levels(row, bank->bins);
    move_floor(bank);
}

void bank_restart(struct bank *bank, int64_t start)
{
    int64_t hop = (int64_t)bank->hop;
    bank->first = (start + (int64_t)bank->length + hop - 1) / hop;
    bank->quiet_until = bank->first;
    bank->floor_count = 0;
    for (size_t i = 0; i < bank->lanes; i++)
        bank->sum[i] = HALF_STEP;
}

void bank_mark_joint(struct bank *bank, int64_t joint)
{
    int64_t hop = (int64_t)bank->hop;
    int64_t clear = (joint + (int64_t)bank->length + hop - 1) / hop;
    if (clear > bank->quiet_until)
        bank->quiet_until = clear;
}

static int largest(const int16_t values[BLOCK])
{
    int most = values[0];
    for (size_t j = 1; j < BLOCK; j++)
        most = values[j] > most ? values[j] : most;
    return most;
}

/* Does any lane stand over its floor? In noise the answer is no, and nothing else need be asked. */
static bool stands_over_floor(const struct bank *bank, const int16_t *restrict row)
{
    const int16_t *restrict level = bank->floor;
    const int16_t *restrict need = bank->need;
    int16_t margins[BLOCK];
    for (size_t j = 0; j < BLOCK; j++)
        margins[j] = -NEVER;
    for (size_t i = 0; i < bank->lanes; i += BLOCK)
        for (size_t j = 0; j < BLOCK; j++) {
            int16_t over = (int16_t)(row[i + j] - level[i + j] - need[i + j]);
            margins[j] = (int16_t)(margins[j] > over ? margins[j] : over);
        }
    return largest(margins) >= 0;
}

/* Is there a lane that also has risen since `near` hops ago, and is past its crest? */
static bool has_risen_to_crest(const struct bank *bank, int64_t frame)
{
    const int16_t *restrict row = bank_row(bank, frame);
    const int16_t *restrict near = bank_row(bank, frame - bank->near);
    const int16_t *restrict soon = bank_row(bank, frame + bank->look / 2);
    const int16_t *restrict late = bank_row(bank, frame + bank->look);
    const int16_t *restrict level = bank->floor;
    const int16_t *restrict need = bank->need;
    const int16_t *restrict rise = bank->rise;
    const int16_t crest = (int16_t)(CREST_DB * BANK_STEPS_PER_DB);
    int16_t margins[BLOCK];
    for (size_t j = 0; j < BLOCK; j++)
        margins[j] = -NEVER;
    for (size_t i = 0; i < bank->lanes; i += BLOCK)
        for (size_t j = 0; j < BLOCK; j++) {
            int16_t over = (int16_t)(row[i + j] - level[i + j] - need[i + j]);
            int16_t risen = (int16_t)(row[i + j] - near[i + j] - rise[i + j]);
            int16_t later = (int16_t)(soon[i + j] > late[i + j] ? soon[i + j] : late[i + j]);
            int16_t crested = (int16_t)(row[i + j] + crest - later);
            int16_t least = (int16_t)(over < risen ? over : risen);
            least = (int16_t)(least < crested ? least : crested);
            margins[j] = (int16_t)(margins[j] > least ? margins[j] : least);
        }
    return largest(margins) >= 0;
}

static int compare_levels(const void *a, const void *b)
{
    int16_t left = *(const int16_t *)a, right = *(const int16_t *)b;
    return (left > right) - (left < right);
}

/* Which of the first `lanes` stands out most from what it needs. */
static size_t strongest_lane(const struct bank *bank, const int16_t *row, const int16_t *level,
                             size_t lanes)
{
    size_t strongest = 1;
    int best = -2 * NEVER;
    for (size_t i = 1; i < lanes; i++) {
        int over = row[i] - level[i] - bank->need[i];
        if (bank->need[i] != NEVER && over > best) {
            best = over;
            strongest = i;
        }
    }
    return strongest;
}

/* One floor in many lies low by chance, and noise would stand over it once in an hour: a bin's
 * floor is taken no lower than the mean of those around it. */
static bool stands_over_neighbours(const struct bank *bank, int64_t frame)
{
    const int16_t *row = bank_row(bank, frame), *near = bank_row(bank, frame - bank->near);
    for (size_t k = 1; k < bank->lanes; k++) {
        if (row[k] - bank->floor[k] < bank->need[k] || row[k] - near[k] < bank->rise[k])
            continue;
        if (k >= bank->bins)
            return true;
        size_t from = k > NEIGHBOURS ? k - NEIGHBOURS : 1;
        size_t until = k + NEIGHBOURS + 1 < bank->bins ? k + NEIGHBOURS + 1 : bank->bins;
        int sum = 0;
        for (size_t i = from; i < until; i++)
            sum += bank->floor[i];
        if (row[k] - sum / (int)(until - from) >= bank->need[k])
            return true;
    }
    return false;
}

bool bank_test(const struct bank *bank, size_t *out_lane)
{
    int64_t frame = bank->newest - bank->look;
    if (bank->floor_count < 2 || frame < bank->quiet_until ||
        !stands_over_floor(bank, bank_row(bank, frame)) || !has_risen_to_crest(bank, frame) ||
        !stands_over_neighbours(bank, frame))
        return false;
    const int16_t *row = bank_row(bank, frame);
    size_t lane = strongest_lane(bank, row, bank->floor, bank->lanes);
    /* Beside a tone that swells, bins jump to a steady level. So what stands out most must
     * have risen itself, and no longer grow. */
    int level = row[lane] + bank_steps(CREST_DB);
    if (row[lane] - bank_row(bank, frame - bank->near)[lane] < bank->rise[lane] ||
        bank_row(bank, frame + bank->look / 2)[lane] > level ||
        bank_row(bank, frame + bank->look)[lane] > level)
        return false;
    *out_lane = strongest_lane(bank, row, bank->floor, bank->bins);
    return true;
}

bool bank_test_over_calm(const struct bank *bank, const int16_t *calm, size_t *out_lane)
{
    int64_t frame = bank->newest - bank->look;
    if (frame < bank->quiet_until || frame - bank->near - CALM_ROWS + 1 < bank->first)
        return false;
    const int16_t *row = bank_row(bank, frame), *near = bank_row(bank, frame - bank->near);
    const int16_t *soon = bank_row(bank, frame + bank->look / 2);
    const int16_t *late = bank_row(bank, frame + bank->look);
    const int crest = bank_steps(CREST_DB), still = bank_steps(CALM_DB);
    for (size_t i = SLOW_BINS; i < bank->lanes; i++) {
        if (row[i] - calm[i] < bank->need[i] + still || row[i] - near[i] < bank->rise[i] ||
            row[i] + crest < soon[i] || row[i] + crest < late[i])
            continue;
        int sum = 0;
        for (int back = 0; back < CALM_ROWS; back++)
            sum += bank_row(bank, frame - bank->near - back)[i];
        if (sum / CALM_ROWS > calm[i] + still)
            continue;
        *out_lane = strongest_lane(bank, row, calm, bank->bins);
        return true;
    }
    return false;
}

int bank_median_level(const struct bank *bank, const int16_t *row)
{
    size_t count = 0;
    int16_t *levels = malloc(bank->bins * sizeof *levels);
    if (levels == NULL)
        return INT16_MAX;
    for (size_t k = 1; k + 1 < bank->bins; k++)
        if (bank->need[k] != NEVER)
            levels[count++] = row[k];
    qsort(levels, count, sizeof *levels, compare_levels);
    int level = count > 0 ? levels[count / 2] : INT16_MAX;
    free(levels);
    return level;
}

bool bank_test_over_ring(const struct bank *bank, int64_t since)
{
    int64_t frame = bank->newest - bank->look, last = frame - bank->near;
    if (since < last - BANK_FLOOR + 1)
        return true; /* the floor of the first test was of the ring alone */
    if (since > last)
        since = last;
    const int16_t *row = bank_row(bank, frame), *near = bank_row(bank, last);
    const int16_t *soon = bank_row(bank, frame + bank->look / 2);
    const int16_t *late = bank_row(bank, frame + bank->look);
    const int crest = bank_steps(CREST_DB);
    for (size_t i = SLOW_BINS; i < bank->lanes; i++) {
        if (i == bank->bins || row[i] - bank->floor[i] < bank->need[i] ||
            row[i] - near[i] < bank->rise[i] || row[i] + crest < soon[i] ||
            row[i] + crest < late[i])
            continue;
        int sum = 0;
        for (int64_t j = since; j <= last; j++)
            sum += bank_row(bank, j)[i];
        if (row[i] - sum / (int)(last - since + 1) >= bank->need[i])
            return true;
    }
    return false;
}

double bank_lane_hz(const struct bank *bank, size_t lane)
{
    double bin_hz = bank->rate_hz / (double)bank->length;
    if (lane < bank->bins)
        return (double)lane * bin_hz;
    return ((double)(lane - bank->bins) * BANK_GROUP + 0.5 * BANK_GROUP + 0.5) * bin_hz;
}

float bank_power(int level)
{
    uint32_t bits = (uint32_t)level << 17;
    float power;
    memcpy(&power, &bits, sizeof power);
    return power;
}

double bank_power_over(const struct bank *bank, const int16_t *row, const int16_t *noise,
                       double over_db)
{
    double sum = 0;
    int over = bank_steps(over_db);
    for (size_t k = 1; k + 1 < bank->bins; k++)
        if (bank->need[k] != NEVER && (noise == NULL || row[k] - noise[k] >= over))
            sum += (double)bank_power(row[k]);
    return sum;
}

double bank_noise_power(const struct bank *bank)
{
    if (bank->floor_count == 0)
        return 0;
    double length = (double)bank->length;
    double scale = pow(10, LOG_MEAN_DB / 10) * 2 / (length * length * 3 / 8);
    double power = scale * bank_power_over(bank, bank->floor, NULL, 0);
    double silence = SILENCE_RMS * SILENCE_RMS;
    return power > 2 * silence ? power - silence : 0;
}

double bank_trigger_amplitude(const struct bank *bank)
{
    double power = (double)bank_power(bank_median_level(bank, bank->floor) + bank->need[2]);
    /* A tone of amplitude A in the middle of a bin: power (A length / 4)^2. */
    return sqrt(power) * 4 / (double)bank->length;
}

double bank_white_power(const struct bank *bank, double mean_square)
{
    return mean_square * (double)bank->length * 3 / 8;
}
