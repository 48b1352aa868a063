#include "log/pack.h"

#include <math.h>
#include <string.h>

/* First byte of each form. A form, once released, is read for ever. */
#define STRIKE_FORM  1
#define READING_FORM 1

/* Both structs are runs of doubles (after a mode's label). A number that a later version adds at
 * the end of one is unknown (NAN) in what an older one packed. */
#define WHY_NUMBERS  (sizeof(struct why) / sizeof(double))
#define MODE_NUMBERS ((sizeof(struct mode) - offsetof(struct mode, f_hz)) / sizeof(double))

_Static_assert(sizeof(struct why) % sizeof(double) == 0 && WHY_NUMBERS <= 64, "doubles alone");
_Static_assert(offsetof(struct mode, f_hz) % sizeof(double) == 0, "no gap after the label");
_Static_assert(sizeof(double) == sizeof(uint64_t), "IEEE 754 binary64");

static void put_integer(struct text *out, uint64_t value, unsigned bytes)
{
    char little[8];
    for (unsigned i = 0; i < bytes; i++)
        little[i] = (char)(unsigned char)(value >> (8 * i) & 0xffu);
    text_append_bytes(out, little, bytes);
}

static void put_double(struct text *out, double value)
{
    uint64_t bits = 0;
    memcpy(&bits, &value, sizeof bits);
    put_integer(out, bits, 8);
}

struct source {
    const unsigned char *at, *end;
    bool failed;
};

static uint64_t take_integer(struct source *source, unsigned bytes)
{
    if ((size_t)(source->end - source->at) < bytes) {
        source->failed = true;
        return 0;
    }
    uint64_t value = 0;
    for (unsigned i = 0; i < bytes; i++)
        value |= (uint64_t)source->at[i] << (8 * i);
    source->at += bytes;
    return value;
}

static double take_double(struct source *source)
{
    uint64_t bits = take_integer(source, 8);
    double value = 0;
    memcpy(&value, &bits, sizeof value);
    return value;
}

/* A count with its bound: anything above it is damage. */
static unsigned take_count(struct source *source, unsigned bound)
{
    uint64_t count = take_integer(source, 1);
    if (count > bound) {
        source->failed = true;
        return 0;
    }
    return (unsigned)count;
}

static struct source source_of(const void *bytes, size_t size, unsigned form)
{
    if (bytes == NULL)
        return (struct source){.failed = true};
    struct source source = {.at = bytes, .end = (const unsigned char *)bytes + size};
    if (take_integer(&source, 1) != form)
        source.failed = true;
    return source;
}

static bool source_end(const struct source *source, const char *what, struct error *err)
{
    if (source->failed || source->at != source->end)
        return error_set(err, ERROR_DATA, "the stored %s is damaged", what);
    return true;
}

void pack_strike(const struct strike *strike, struct text *out_bytes)
{
    put_integer(out_bytes, STRIKE_FORM, 1);
    put_double(out_bytes, strike->rate_hz);
    put_integer(out_bytes, (uint64_t)strike->channel, 4);
    put_integer(out_bytes, strike->first_frame, 8);
    put_integer(out_bytes, strike->frame_count, 8);
    put_integer(out_bytes, strike->trigger, 8);
    put_integer(out_bytes, (uint64_t)strike->end, 1);
    put_integer(out_bytes, strike->lost_count, 1);
    for (unsigned i = 0; i < strike->lost_count; i++) {
        put_integer(out_bytes, strike->lost[i].at, 8);
        put_integer(out_bytes, strike->lost[i].frames, 8);
    }
    put_integer(out_bytes, strike->carried_count, 1);
    for (unsigned i = 0; i < strike->carried_count; i++) {
        put_double(out_bytes, strike->carried[i].f_hz);
        put_double(out_bytes, strike->carried[i].decay_per_s);
        put_double(out_bytes, strike->carried[i].amplitude);
        put_double(out_bytes, strike->carried[i].phase_rad);
    }
}

bool unpack_strike(const void *bytes, size_t size, struct strike *out_strike, struct error *err)
{
    struct source source = source_of(bytes, size, STRIKE_FORM);
    struct strike strike = {0};
    strike.rate_hz = take_double(&source);
    strike.channel = (int)take_integer(&source, 4);
    strike.first_frame = take_integer(&source, 8);
    strike.frame_count = (size_t)take_integer(&source, 8);
    strike.trigger = (size_t)take_integer(&source, 8);
    strike.end = (enum strike_end)take_count(&source, STRIKE_END_LOST);
    strike.lost_count = take_count(&source, STRIKE_LOST_MAX);
    for (unsigned i = 0; i < strike.lost_count; i++) {
        strike.lost[i].at = (size_t)take_integer(&source, 8);
        strike.lost[i].frames = take_integer(&source, 8);
    }
    strike.carried_count = take_count(&source, STRIKE_CARRIED_MAX);
    for (unsigned i = 0; i < strike.carried_count; i++) {
        strike.carried[i].f_hz = take_double(&source);
        strike.carried[i].decay_per_s = take_double(&source);
        strike.carried[i].amplitude = take_double(&source);
        strike.carried[i].phase_rad = take_double(&source);
    }
    if (!source_end(&source, "strike", err))
        return false;
    *out_strike = strike;
    return true;
}

static void pack_why(const struct why *why, struct text *out_bytes)
{
    double numbers[WHY_NUMBERS];
    memcpy(numbers, why, sizeof numbers);
    uint64_t known = 0;
    for (unsigned i = 0; i < WHY_NUMBERS; i++)
        known |= isnan(numbers[i]) ? 0 : UINT64_C(1) << i;
    put_integer(out_bytes, known, 8);
    for (unsigned i = 0; i < WHY_NUMBERS; i++) {
        if (!isnan(numbers[i]))
            put_double(out_bytes, numbers[i]);
    }
}

static void unpack_why(struct source *source, struct why *out_why)
{
    double numbers[WHY_NUMBERS];
    uint64_t known = take_integer(source, 8);
    for (unsigned i = 0; i < 64; i++) {
        double value = known >> i & 1u ? take_double(source) : (double)NAN;
        if (i < WHY_NUMBERS)
            numbers[i] = value;
    }
    memcpy(out_why, numbers, sizeof numbers);
}

static void pack_mode(const struct mode *mode, struct text *out_bytes)
{
    double numbers[MODE_NUMBERS];
    memcpy(numbers, &mode->f_hz, sizeof numbers);
    text_append_bytes(out_bytes, mode->label, sizeof mode->label);
    put_integer(out_bytes, MODE_NUMBERS, 1);
    for (unsigned i = 0; i < MODE_NUMBERS; i++)
        put_double(out_bytes, numbers[i]);
}

static void unpack_mode(struct source *source, struct mode *out_mode)
{
    double numbers[MODE_NUMBERS];
    for (unsigned i = 0; i < sizeof out_mode->label; i++)
        out_mode->label[i] = (char)(unsigned char)take_integer(source, 1);
    out_mode->label[sizeof out_mode->label - 1] = '\0';
    unsigned count = take_count(source, 64);
    for (unsigned i = 0; i < count || i < MODE_NUMBERS; i++) {
        double value = i < count ? take_double(source) : (double)NAN;
        if (i < MODE_NUMBERS)
            numbers[i] = value;
    }
    memcpy(&out_mode->f_hz, numbers, sizeof numbers);
}

void pack_reading(const struct reading *reading, struct text *out_bytes)
{
    put_integer(out_bytes, READING_FORM, 1);
    put_double(out_bytes, reading->onset_frame);
    put_double(out_bytes, reading->window_begin_frame);
    put_double(out_bytes, reading->window_end_frame);
    put_double(out_bytes, reading->peak_dbfs);
    put_double(out_bytes, reading->noise_dbfs);
    put_double(out_bytes, reading->snr_db);
    put_double(out_bytes, reading->fit_ms);
    put_integer(out_bytes, (uint64_t)reading->verdict, 1);
    put_integer(out_bytes, reading->reasons, 4);
    put_integer(out_bytes, reading->remarks, 4);
    pack_why(&reading->why, out_bytes);
    put_integer(out_bytes, reading->mode_count, 1);
    for (unsigned i = 0; i < reading->mode_count; i++)
        pack_mode(&reading->modes[i], out_bytes);
    put_integer(out_bytes, reading->tone_count, 1);
    for (unsigned i = 0; i < reading->tone_count; i++) {
        put_double(out_bytes, reading->tones[i].f_hz);
        put_double(out_bytes, reading->tones[i].level_dbfs);
    }
}

bool unpack_reading(const void *bytes, size_t size, struct reading *out_reading, struct error *err)
{
    struct source source = source_of(bytes, size, READING_FORM);
    struct reading reading;
    reading_init(&reading);
    reading.onset_frame = take_double(&source);
    reading.window_begin_frame = take_double(&source);
    reading.window_end_frame = take_double(&source);
    reading.peak_dbfs = take_double(&source);
    reading.noise_dbfs = take_double(&source);
    reading.snr_db = take_double(&source);
    reading.fit_ms = take_double(&source);
    reading.verdict = (enum verdict)take_count(&source, VERDICT_REJECTED);
    reading.reasons = (unsigned)take_integer(&source, 4);
    reading.remarks = (unsigned)take_integer(&source, 4);
    unpack_why(&source, &reading.why);
    reading.mode_count = take_count(&source, READING_MODES_MAX);
    for (unsigned i = 0; i < reading.mode_count; i++)
        unpack_mode(&source, &reading.modes[i]);
    reading.tone_count = take_count(&source, READING_TONES_MAX);
    for (unsigned i = 0; i < reading.tone_count; i++) {
        reading.tones[i].f_hz = take_double(&source);
        reading.tones[i].level_dbfs = take_double(&source);
    }
    if (!source_end(&source, "reading", err))
        return false;
    *out_reading = reading;
    return true;
}
