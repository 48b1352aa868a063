/* Turns the schedule's events into samples, chunk by chunk. */
#include "input/sim_blow.h"
#include "input/sim_noise.h"
#include "input/sim_random.h"
#include "input/simulated.h"
#include "wane/strike.h"

#include <math.h>
#include <stdlib.h>
#include <string.h>

/* One mode under one blow. */
struct arrow {
    double complex s;      /* 1/s */
    double complex step;   /* exp(s / rate) */
    double complex start;  /* free ring, carried back to the onset */
    double complex driven; /* start over the blow's total: gain on the driven motion */
};

struct blow {
    double onset_s, contact_s;
    double noise_rms;
    uint64_t key;
    size_t arrow_count;
    struct arrow arrows[SIM_MODES_MAX];
};

struct channel {
    struct sim_schedule *schedule;
    bool has_next;
    struct sim_event next;
    struct blow *blows; /* that still ring, or will within the chunk */
    size_t blow_count, blow_capacity;
    struct sim_event hum;
    struct sim_cough cough;
    bool has_hum, has_cough;
    struct sim_room room;
    double coupling_pole; /* 0: none */
    double last_in, last_out;
    double chunk[SIM_CHUNK];
};

struct sim_bench {
    struct sim_settings settings;
    double faint;         /* an amplitude that nobody can find under the room's noise */
    uint64_t chunk_begin; /* frame of chunk[0] of every channel */
    size_t used;          /* frames of the chunk that were handed out */
    struct channel channels[SIM_CHANNELS_MAX];
};

static bool reserve_blows(struct channel *channel, size_t more, struct error *err)
{
    size_t wanted = channel->blow_count + more;
    if (wanted <= channel->blow_capacity)
        return true;
    size_t capacity = 2 * wanted;
    struct blow *blows = realloc(channel->blows, capacity * sizeof *blows);
    if (blows == NULL)
        return error_set(err, ERROR_MEMORY, "no memory for the simulated bench");
    channel->blows = blows;
    channel->blow_capacity = capacity;
    return true;
}

static void add_blow(struct channel *channel, const struct sim_event *event, double rate_hz,
                     double after_s, double force)
{
    struct blow *blow = &channel->blows[channel->blow_count++];
    uint64_t key = sim_key(channel->room.key, 'B', event->index);
    *blow = (struct blow){
        .onset_s = event->onset_s + after_s,
        .contact_s = event->contact_s,
        .noise_rms = force * event->blow_rms,
        .key = after_s > 0 ? ~key : key,
        .arrow_count = event->mode_count,
    };
    for (size_t i = 0; i < event->mode_count; i++) {
        const struct sim_truth_mode *mode = &event->modes[i];
        double complex s = sim_mode_pole(mode->f_hz, mode->decay_per_s);
        double complex start = force * mode->amplitude * cexp(mode->raw_phase_rad * SIM_I);
        blow->arrows[i] = (struct arrow){
            .s = s,
            .step = cexp(s / rate_hz),
            .start = start,
            .driven = start / sim_blow_total(s, event->contact_s),
        };
    }
}

/* Takes the events that begin before `until_s`. */
static bool take_events(struct channel *channel, double rate_hz, double until_s, struct error *err)
{
    while (channel->has_next && channel->next.onset_s < until_s) {
        const struct sim_event *event = &channel->next;
        if (event->kind == SIM_EVENT_STRIKE) {
            if (!reserve_blows(channel, 2, err))
                return false;
            add_blow(channel, event, rate_hz, 0, 1);
            if (event->defect == SIM_DOUBLE_HIT)
                add_blow(channel, event, rate_hz, event->after_s, event->second);
        } else if (event->kind == SIM_EVENT_HUM) {
            channel->hum = *event;
            channel->has_hum = true;
        } else {
            channel->cough = (struct sim_cough){
                .event = *event, .key = sim_key(channel->room.key, 'C', event->index)};
            channel->has_cough = true;
        }
        channel->has_next = sim_schedule_next(channel->schedule, &channel->next);
    }
    return true;
}

static void add_arrow(const struct arrow *arrow, const struct blow *blow, double rate_hz,
                      uint64_t first_frame, double out[SIM_CHUNK])
{
    size_t i = 0;
    for (; i < SIM_CHUNK; i++) {
        double t_s = (double)(first_frame + i) / rate_hz - blow->onset_s;
        if (t_s >= 0 && t_s >= blow->contact_s)
            break;
        if (t_s > 0)
            out[i] += creal(arrow->driven * sim_blow_during(arrow->s, blow->contact_s, t_s));
    }
    /* Turned on from here by multiplication; exact again at every chunk. */
    double t_s = (double)(first_frame + i) / rate_hz - blow->onset_s;
    double complex now = i < SIM_CHUNK ? arrow->start * cexp(arrow->s * t_s) : 0;
    double now_re = creal(now);
    double now_im = cimag(now);
    double step_re = creal(arrow->step);
    double step_im = cimag(arrow->step);
    for (; i < SIM_CHUNK; i++) {
        out[i] += now_re;
        double turned = now_re * step_re - now_im * step_im;
        now_im = now_re * step_im + now_im * step_re;
        now_re = turned;
    }
}

/* Air and surface of both bodies: broadband, half as long again as the contact. */
static void add_blow_noise(const struct blow *blow, double rate_hz, uint64_t first_frame,
                           double out[SIM_CHUNK])
{
    double noise[SIM_CHUNK];
    double length_s = 1.5 * blow->contact_s;
    double begin_s = (double)first_frame / rate_hz - blow->onset_s;
    if (blow->noise_rms <= 0 || begin_s > length_s || begin_s < -SIM_CHUNK / rate_hz)
        return;
    sim_normal_fill(blow->key, first_frame, noise, SIM_CHUNK);
    for (size_t i = 0; i < SIM_CHUNK; i++) {
        double t_s = (double)(first_frame + i) / rate_hz - blow->onset_s;
        if (t_s <= 0 || t_s >= length_s)
            continue;
        double window = sin(WANE_PI * t_s / length_s);
        out[i] += blow->noise_rms * window * window * noise[i];
    }
}

/* Adds one blow's chunk; false when it has become too faint to go on. */
static bool add_blow_chunk(const struct blow *blow, double faint, double rate_hz,
                           uint64_t first_frame, double out[SIM_CHUNK])
{
    double end_s = (double)(first_frame + SIM_CHUNK) / rate_hz - blow->onset_s;
    bool is_heard = end_s < 2 * blow->contact_s;
    for (size_t i = 0; i < blow->arrow_count; i++) {
        const struct arrow *arrow = &blow->arrows[i];
        double begin_s = fmax(0, end_s - SIM_CHUNK / rate_hz);
        if (begin_s > blow->contact_s &&
            cabs(arrow->start) * exp(creal(arrow->s) * begin_s) < faint)
            continue;
        is_heard = true;
        add_arrow(arrow, blow, rate_hz, first_frame, out);
    }
    add_blow_noise(blow, rate_hz, first_frame, out);
    return is_heard;
}

/* The input's own part: AC coupling (see sim_coupling_gain), then the end stop of a converter. */
static void pass_input(struct channel *channel)
{
    double p = channel->coupling_pole;
    for (size_t i = 0; i < SIM_CHUNK; i++) {
        double value = channel->chunk[i];
        if (p > 0) {
            double passed = (1 + p) / 2 * (value - channel->last_in) + p * channel->last_out;
            channel->last_in = value;
            channel->last_out = value = passed;
        }
        channel->chunk[i] = fmax(-1, fmin(1, value));
    }
}

static bool make_chunk(struct sim_bench *bench, struct channel *channel, struct error *err)
{
    double rate_hz = bench->settings.rate_hz;
    uint64_t first_frame = bench->chunk_begin;
    double begin_s = (double)first_frame / rate_hz;
    if (!take_events(channel, rate_hz, (double)(first_frame + SIM_CHUNK) / rate_hz, err))
        return false;
    memset(channel->chunk, 0, sizeof channel->chunk);
    size_t kept = 0;
    for (size_t i = 0; i < channel->blow_count; i++) {
        bool is_heard =
            add_blow_chunk(&channel->blows[i], bench->faint, rate_hz, first_frame, channel->chunk);
        if (is_heard)
            channel->blows[kept++] = channel->blows[i];
    }
    channel->blow_count = kept;
    sim_room_add(&channel->room, first_frame, channel->chunk);
    channel->has_hum = channel->has_hum && channel->hum.until_s > begin_s;
    channel->has_cough = channel->has_cough && channel->cough.event.until_s > begin_s;
    if (channel->has_hum)
        sim_hum_add(&channel->hum, rate_hz, first_frame, channel->chunk);
    if (channel->has_cough)
        sim_cough_add(&channel->cough, rate_hz, first_frame, channel->chunk);
    pass_input(channel);
    return true;
}

static bool start_channel(struct sim_bench *bench, int number, struct error *err)
{
    struct channel *channel = &bench->channels[number - 1];
    channel->schedule = sim_schedule_create(&bench->settings, number, err);
    if (channel->schedule == NULL)
        return false;
    channel->has_next = sim_schedule_next(channel->schedule, &channel->next);
    sim_room_init(&channel->room, &bench->settings, number);
    if (bench->settings.coupling_hz > 0)
        channel->coupling_pole =
            exp(-2 * WANE_PI * bench->settings.coupling_hz / bench->settings.rate_hz);
    return true;
}

struct sim_bench *sim_bench_create(const struct sim_settings *settings, struct error *err)
{
    struct sim_bench *bench = calloc(1, sizeof *bench);
    if (bench == NULL) {
        error_set(err, ERROR_MEMORY, "no memory for the simulated bench");
        return NULL;
    }
    bench->settings = *settings;
    /* 80 dB under the room's noise, where even ten minutes of samples show nothing. */
    bench->faint = pow(10, (settings->noise_dbfs - 80) / 20);
    bench->used = SIM_CHUNK;
    /* Channel 1 always starts: it is what refuses settings that are wrong, a count too. */
    bool ok = start_channel(bench, 1, err);
    for (int number = 2; ok && number <= settings->channels; number++)
        ok = start_channel(bench, number, err);
    if (!ok) {
        sim_bench_destroy(bench);
        return NULL;
    }
    return bench;
}

void sim_bench_destroy(struct sim_bench *bench)
{
    if (bench == NULL)
        return;
    for (size_t i = 0; i < SIM_CHANNELS_MAX; i++) {
        sim_schedule_destroy(bench->channels[i].schedule);
        free(bench->channels[i].blows);
    }
    free(bench);
}

bool sim_bench_render(struct sim_bench *bench, float *out, size_t frame_count, struct error *err)
{
    size_t channels = (size_t)bench->settings.channels;
    for (size_t done = 0; done < frame_count;) {
        if (bench->used == SIM_CHUNK) {
            for (size_t k = 0; k < channels; k++) {
                if (!make_chunk(bench, &bench->channels[k], err))
                    return false;
            }
            bench->used = 0;
            bench->chunk_begin += SIM_CHUNK;
        }
        size_t count = SIM_CHUNK - bench->used;
        if (count > frame_count - done)
            count = frame_count - done;
        for (size_t k = 0; k < channels; k++) {
            const double *chunk = bench->channels[k].chunk + bench->used;
            for (size_t i = 0; i < count; i++)
                out[(done + i) * channels + k] = (float)chunk[i];
        }
        bench->used += count;
        done += count;
    }
    return true;
}
