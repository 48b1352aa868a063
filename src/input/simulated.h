/* The simulated bench: a small workshop in which things are struck, for the demo and for tests.
 * It makes its own truth, and it shares no code with the fit, or the tests would agree with
 * themselves.
 *
 * A body is a sum of damped oscillators, m x'' + c x' + k x = F(t). The blow's force is one raised
 * cosine of the contact's length; while it acts it drives every mode, afterwards they ring freely.
 * The response is written in closed form, so the samples are those of the continuous motion at any
 * (fractional) onset. A tank is let go by a switch: no contact, the ring starts at once.
 * Added are the blow's own broadband noise, room noise with a 1/f part whose level wanders, and, as
 * asked for, defects. At the end stands an input: AC coupling (one pole), an end stop at 1.
 */
#ifndef SIMULATED_H
#define SIMULATED_H

#include "input/sim_parts.h"
#include "wane/error.h"
#include "wane/text.h"

#include <stdint.h>

#define SIM_CHANNELS_MAX 4

enum sim_defect {
    SIM_NO_DEFECT,
    SIM_DOUBLE_HIT, /* a second blow 15-45 ms later; a tank's switch bounces after 0.3-2 ms */
    SIM_CLIPPED,    /* so hard that the input reaches its end stop */
    SIM_SOFT,       /* so soft that it hardly stands over the noise */
    SIM_RESTRUCK,   /* the next strike comes after 0.35-0.7 s */
    SIM_HUM,        /* mains hum swells up before the strike and fades after it */
    SIM_COUGH,      /* somebody coughs, nothing is struck */
    SIM_DEFECT_COUNT,
    SIM_SOME = SIM_DEFECT_COUNT, /* each of them now and then */
};

/* Start from simulated_defaults. */
struct sim_settings {
    uint64_t seed;
    double rate_hz;
    int channels;       /* 1 ... SIM_CHANNELS_MAX; channel 2 has the next part, and so on */
    enum sim_part part; /* of channel 1 */
    enum sim_defect defects;
    double f_hz, zeta;    /* of SIM_MODE: struck at random phase, always equally hard */
    double level_dbfs;    /* strongest mode of an everyday strike */
    double noise_dbfs;    /* 20 log10(sqrt 2 rms) of the room, over the whole band */
    double interval_s;    /* between strikes, +- 15 %; 0: 4 ... 9 s */
    double coupling_hz;   /* corner of the input's AC coupling; 0: none */
    uint64_t strikes_max; /* of each channel; 0: endless */
};

/* The demo: seed 1, 48 kHz, 1 channel, all parts, some defects. */
void simulated_defaults(struct sim_settings *out_settings);

enum sim_event_kind { SIM_EVENT_STRIKE, SIM_EVENT_HUM, SIM_EVENT_COUGH };

/* What is true of one mode of one strike: level and phase at the onset, as heard through the
 * input's coupling: amplitude exp(-decay_per_s t) cos(2 pi f_hz t + phase_rad) once the contact is
 * over, t from onset_s. `amplitude` and `raw_phase_rad` are those before the coupling. */
struct sim_truth_mode {
    double f_hz, decay_per_s;
    double level_dbfs, phase_rad;
    double amplitude, raw_phase_rad;
};

/* One thing that happens. Plain data. */
struct sim_event {
    enum sim_event_kind kind;
    int channel;             /* 1-based */
    uint64_t number;         /* strikes of this channel so far, this one counted */
    uint64_t index;          /* events of this channel before this one */
    double onset_s, until_s; /* until_s: end of a cough or hum; of a strike: of its contact */
    enum sim_part part;
    enum sim_defect defect;
    double after_s; /* double hit: second blow's onset after the first; else 0 */
    double second;  /* its force, as a share of the first */
    double contact_s;
    double blow_rms;                            /* noise of the blow, rms at its height */
    double level;                               /* of a hum or cough, as an amplitude */
    struct sim_truth_mode modes[SIM_MODES_MAX]; /* strongest first; of the first blow */
    size_t mode_count;
};

/* --- What happens, without a single sample: the truth alone. --- */

struct sim_schedule;

/* The events of one channel, in the order of their onsets. NULL and *err on wrong settings
 * (ERROR_USAGE) or when memory ran out. */
struct sim_schedule *sim_schedule_create(const struct sim_settings *settings, int channel,
                                         struct error *err);
void sim_schedule_destroy(struct sim_schedule *schedule);
/* false: strikes_max strikes have been. */
bool sim_schedule_next(struct sim_schedule *schedule, struct sim_event *out_event);

/* --- What is heard. --- */

struct sim_bench;

struct sim_bench *sim_bench_create(const struct sim_settings *settings, struct error *err);
void sim_bench_destroy(struct sim_bench *bench);
/* The next frames: out [frame_count x channels], interleaved, within -1 ... 1. Never ends; the same
 * settings give the same samples at any block size. Fails only when memory ran out. */
bool sim_bench_render(struct sim_bench *bench, float *out, size_t frame_count, struct error *err);

/* --- Words and truth files. --- */

/* "none" "double-hit" "clipped" "soft" "restruck" "hum" "cough" "some". */
const char *sim_defect_name(enum sim_defect defect);
bool sim_defect_from_name(const char *name, enum sim_defect *out_defect);

/* The event as a JSON object:
 * strikes: channel, strike (number), onset_s, contact_s, part, defect (null when sound), after_s
 * (double hit), modes [f_hz, decay_per_s, q, zeta, level_dbfs, phase_rad], strongest first;
 * hum and cough: channel, kind, onset_s, until_s, level_dbfs. */
void sim_event_write(struct json_writer *json, const struct sim_event *event);

#endif
