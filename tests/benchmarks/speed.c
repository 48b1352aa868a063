/* Costs as ratios beside a baseline of the same run: a machine's own speed drops out. */
#include "benchmarks.h"

#include "families.h"
#include "wane/detect.h"
#include "wane/fit.h"
#include "wane/queue.h"

#include <fftw3.h>
#include <gsl/gsl_randist.h>
#include <math.h>
#include <pthread.h>
#include <sndfile.h>
#include <stdint.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#define RATE_HZ 48000.0

static int by_value(const void *a, const void *b)
{
    const double *x = a, *y = b;
    return (*x > *y) - (*x < *y);
}

/* A ring of `seconds` (7 time constants of its slowest mode) with `count` modes apart, or a
 * doublet. */
static bool make_ring(struct scene *scene, double seconds, unsigned count, bool is_doublet,
                      gsl_rng *rng)
{
    *scene = (struct scene){.rate_hz = RATE_HZ, .pulse_count = 1, .mode_count = count};
    scene->onset_frame = floor(SCENE_LEAD_S * RATE_HZ) + gsl_rng_uniform(rng);
    scene->pulses[0] = (struct scene_pulse){.contact_s = 2e-4, .weight = 1.0, .noise = 0.02};
    double slow = 7.0 / seconds;
    double f_hz = draw_uniform(rng, 300.0, 500.0);
    for (unsigned k = 0; k < count; k++) {
        scene->modes[k] = (struct scene_mode){
            .f_hz = f_hz,
            .decay_per_s = slow * (k == 0 ? 1.0 : draw_uniform(rng, 1.0, 4.0)),
            .amplitude = 0.4 / count * (k == 0 ? 1.0 : draw_log(rng, 0.1, 1.0)),
            .phase_rad = draw_uniform(rng, -WANE_PI, WANE_PI),
        };
        f_hz = is_doublet ? f_hz + slow / WANE_PI : f_hz * draw_uniform(rng, 1.2, 1.5);
        if (is_doublet && k > 0)
            scene->modes[k].decay_per_s = 1.1 * slow;
    }
    scene->noise_sd = 0.4 / count * 1e-3;
    bench_close(scene, 7.0, 10000000, rng);
    return bench_make(scene, rng);
}

/* Milliseconds of one real FFT of the window in double precision, planned before: the baseline. */
static double fft_ms(const struct strike *strike)
{
    size_t n = strike->frame_count - strike->trigger;
    double *in = fftw_alloc_real(n);
    fftw_complex *out = fftw_alloc_complex(n / 2 + 1);
    fftw_plan plan = fftw_plan_dft_r2c_1d((int)n, in, out, FFTW_ESTIMATE);
    for (size_t i = 0; i < n; i++)
        in[i] = (double)strike->samples[strike->trigger + i];
    double best = (double)INFINITY;
    for (unsigned repeat = 0; repeat < 3; repeat++) {
        double begin_s = benchmark_thread_s();
        fftw_execute(plan);
        best = fmin(best, 1e3 * (benchmark_thread_s() - begin_s));
    }
    fftw_destroy_plan(plan);
    fftw_free(in);
    fftw_free(out);
    return best;
}

static bool time_fits(struct fit_workspace *workspace, double seconds, unsigned count,
                      bool is_doublet, unsigned repeats, gsl_rng *rng)
{
    double *ms = malloc(repeats * sizeof *ms), *fft = malloc(repeats * sizeof *fft);
    bool done = ms && fft;
    for (unsigned i = 0; done && i < repeats; i++) {
        struct scene scene;
        struct reading reading;
        struct error err = {0};
        done = make_ring(&scene, seconds, count, is_doublet, rng);
        struct strike *strike = done ? bench_strike(&scene, &scene.takes[0]) : NULL;
        done = strike != NULL;
        if (done) {
            struct fit_settings settings = {0};
            double begin_s = benchmark_thread_s();
            done = fit_strike(workspace, strike, &settings, &reading, &err);
            ms[i] = 1e3 * (benchmark_thread_s() - begin_s);
            fft[i] = fft_ms(strike);
        }
        strike_destroy(strike);
        bench_done(&scene);
    }
    if (done) {
        qsort(ms, repeats, sizeof *ms, by_value);
        qsort(fft, repeats, sizeof *fft, by_value);
        printf("  fit %.0f s, %2u modes%s: median %6.2f ms, worst %6.2f ms; one FFT of the window "
               "%.2f ms; ratio %.2f\n",
               seconds, count, is_doublet ? " (a doublet)" : "", ms[repeats / 2], ms[repeats - 1],
               fft[repeats / 2], ms[repeats / 2] / fft[repeats / 2]);
        fflush(stdout);
    }
    free(ms);
    free(fft);
    return done;
}

#define BLOCK 4096

/* Minutes of a quiet room with a strike every 3 s (alpha 3 to 12), 16 bits, mono. Ten minutes are
 * made and repeated. */
static bool write_recording(const char *path, unsigned minutes, gsl_rng *rng)
{
    size_t frames = (size_t)((minutes < 10 ? minutes : 10) * 60.0 * RATE_HZ);
    struct scene scene = {.rate_hz = RATE_HZ,
                          .frame_count = frames,
                          .onset_frame = RATE_HZ,
                          .noise_sd = 1e-4,
                          .noise = SCENE_NOISE_ROOM};
    if (!bench_make(&scene, rng))
        return false;
    for (double at_s = 1.0; at_s + 3.0 < (double)frames / RATE_HZ; at_s += 3.0)
        for (unsigned k = 0; k < 3; k++) {
            double f_hz = draw_log(rng, 300.0, 6000.0), decay = draw_log(rng, 3.0, 12.0);
            double a = draw_log(rng, 0.02, 0.2);
            size_t begin = (size_t)(at_s * RATE_HZ);
            for (size_t i = 0; i < (size_t)(2.5 * RATE_HZ); i++) {
                double t = (double)i / RATE_HZ;
                scene.samples[begin + i] +=
                    (float)(a * exp(-decay * t) * sin(2.0 * WANE_PI * f_hz * t));
            }
        }
    SF_INFO info = {
        .samplerate = (int)RATE_HZ, .channels = 1, .format = SF_FORMAT_WAV | SF_FORMAT_PCM_16};
    SNDFILE *file = sf_open(path, SFM_WRITE, &info);
    bool done = file != NULL;
    for (unsigned i = 0; done && i * 10 < minutes; i++)
        done = sf_writef_float(file, scene.samples, (sf_count_t)frames) == (sf_count_t)frames;
    bench_done(&scene);
    return file && sf_close(file) == 0 && done;
}

static double decode_cpu_s(const char *path)
{
    SF_INFO info = {0};
    float block[BLOCK];
    double sum = 0.0, begin_s = benchmark_process_s();
    SNDFILE *file = sf_open(path, SFM_READ, &info);
    if (!file)
        return (double)NAN;
    sf_count_t got;
    while ((got = sf_readf_float(file, block, BLOCK)) > 0)
        sum += (double)block[0];
    sf_close(file);
    return benchmark_process_s() - begin_s + 0.0 * sum;
}

struct fits {
    struct queue *queue;
    struct fit_workspace *workspace;
    unsigned strikes, good;
    double fit_s;
};

static void destroy_message(void *message)
{
    strike_destroy(message);
}

static void *run_fits(void *argument)
{
    struct fits *fits = argument;
    struct strike *before = NULL, *strike;
    struct reading last, reading;
    struct fit_settings settings = {0};
    while ((strike = queue_take(fits->queue, INT64_MAX)) != NULL) {
        if (before)
            fit_carry(before, &last, strike);
        double begin_s = benchmark_thread_s();
        if (fit_strike(fits->workspace, strike, &settings, &reading, NULL)) {
            fits->strikes++;
            fits->good += reading.verdict == VERDICT_GOOD;
        }
        fits->fit_s += benchmark_thread_s() - begin_s;
        strike_destroy(before);
        before = strike;
        last = reading;
    }
    strike_destroy(before);
    return NULL;
}

/* Detects; strikes go to `queue`, or are dropped where it is NULL. Returns seconds in the detector.
 */
static double detect_all(const char *path, struct queue *queue)
{
    SF_INFO info = {0};
    float block[BLOCK];
    struct detect_settings settings = {0};
    double spent_s = 0.0;
    SNDFILE *file = sf_open(path, SFM_READ, &info);
    struct detector *detector = detect_create(&settings, RATE_HZ, 1, NULL);
    sf_count_t got;
    while (file && detector && (got = sf_readf_float(file, block, BLOCK)) > 0) {
        double begin_s = benchmark_thread_s();
        (void)detect_push_block(detector, block, (size_t)got, NULL);
        spent_s += benchmark_thread_s() - begin_s;
        struct strike *strike;
        while ((strike = detect_take_strike(detector)) != NULL)
            if (!queue || !queue_put(queue, strike))
                strike_destroy(strike);
    }
    struct strike *strike;
    if (detector && detect_finish(detector, NULL))
        while ((strike = detect_take_strike(detector)) != NULL)
            if (!queue || !queue_put(queue, strike))
                strike_destroy(strike);
    detect_destroy(detector);
    sf_close(file);
    return spent_s;
}

static bool time_recording(struct fit_workspace *workspace, unsigned minutes, gsl_rng *rng)
{
    char path[64];
    (void)snprintf(path, sizeof path, "/tmp/bench-hour-%u.wav", minutes);
    if (!write_recording(path, minutes, rng)) {
        fprintf(stderr, "benchmarks: %s could not be written\n", path);
        return false;
    }
    double frames = minutes * 60.0 * RATE_HZ;
    double decode_s = decode_cpu_s(path); /* once more: the first pass fills the cache */
    decode_s = decode_cpu_s(path);
    double detect_s = detect_all(path, NULL);
    printf("  decoding %.2f ns a sample; detector %.1f ns a sample (%.3f %% of a core at 48 kHz), "
           "ratio %.1f\n",
           1e9 * decode_s / frames, 1e9 * detect_s / frames, 100.0 * detect_s / (minutes * 60.0),
           detect_s / decode_s);
    struct fits fits = {.queue = queue_create(64, destroy_message), .workspace = workspace};
    pthread_t thread;
    if (!fits.queue || pthread_create(&thread, NULL, run_fits, &fits) != 0)
        return false;
    double begin_s = benchmark_clock_s(), begin_cpu_s = benchmark_process_s();
    (void)detect_all(path, fits.queue);
    queue_close(fits.queue);
    (void)pthread_join(thread, NULL);
    double wall_s = benchmark_clock_s() - begin_s, spent_s = benchmark_process_s() - begin_cpu_s;
    queue_destroy(fits.queue);
    (void)remove(path);
    printf(
        "  %u minutes with a strike every 3 s: %u read, %u good; %.0f x real time on two threads, "
        "CPU %.1f x decoding; %.2f ms a fit\n",
        minutes, fits.strikes, fits.good, minutes * 60.0 / wall_s, spent_s / decode_s,
        1e3 * fits.fit_s / fmax(1.0, fits.strikes));
    return true;
}

bool benchmark_speed(const struct benchmark_words *words)
{
    gsl_rng *rng = gsl_rng_alloc(gsl_rng_mt19937);
    struct error err = {0};
    struct fit_workspace *workspace = fit_workspace_create(500000, &err);
    if (!workspace || !rng) {
        fprintf(stderr, "benchmarks: %s\n", err.text);
        return false;
    }
    gsl_rng_set(rng, words->seed);
    static const struct {
        double seconds;
        unsigned modes;
        bool is_doublet;
    } cases[] = {{1.0, 1, false}, {1.0, 5, false},  {2.0, 3, false}, {3.0, 1, false},
                 {3.0, 5, false}, {3.0, 10, false}, {3.0, 2, true}};
    bool done = true;
    printf("speed, seed %lu\n", words->seed);
    for (size_t i = 0; done && i < sizeof cases / sizeof cases[0]; i++)
        done = time_fits(workspace, cases[i].seconds, cases[i].modes, cases[i].is_doublet, 25, rng);
    /* --n: minutes of the recording, an hour unless said */
    done = done && time_recording(workspace, words->count == 200 ? 60 : words->count, rng);
    fit_workspace_destroy(workspace);
    gsl_rng_free(rng);
    return done;
}
