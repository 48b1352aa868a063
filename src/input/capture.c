/* The capture process: opens one PortAudio stream and copies what comes into the ring. See
 * capture.h for what it and its parent agree on. It ends when its parent does, when its stream
 * does, and by SIGKILL. Nothing of it runs in the daemon. */
#include "capture.h"
#include "capture_devices.h"
#include "wane/clock.h"
#include "wane/ring.h"

#include <errno.h>
#include <portaudio.h>
#include <pthread.h>
#include <stdarg.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/mman.h>
#include <unistd.h>

#define LATENCY_MIN_S   0.1 /* safety counts, not speed: a strike's window is longer by far */
#define FDS_TO_CLOSE    4096
#define ACTIVE_POLL_NS  (CLOCK_NS_PER_S / 20)
#define CHUNK_FRAMES    8192 /* a longer callback block is cut, to fit into any ring */
#define SERVER_CHANNELS 2

/* What the callback needs, and nothing else. */
struct capture {
    struct ring *ring;
    uint64_t frame; /* frames that the driver gave, whether the ring took them or not */
    size_t channels;
};

/* A line is written with one call, so that lines of two threads cannot mix (POSIX: pipes, up to
 * PIPE_BUF). */
static void say(const char *format, ...) __attribute__((format(printf, 1, 2)));
static void say(const char *format, ...)
{
    char line[CAPTURE_LINE_MAX];
    va_list arguments;
    va_start(arguments, format);
    int length = vsnprintf(line, sizeof line - 1, format, arguments);
    va_end(arguments);
    if (length < 0)
        return;
    size_t count = (size_t)length < sizeof line - 2 ? (size_t)length : sizeof line - 2;
    line[count++] = '\n';
    if (write(CAPTURE_FD_MESSAGES, line, count) < 0)
        _exit(EXIT_FAILURE); /* nobody listens any more */
}

static void say_error(const struct error *err)
{
    say("error\t%d\t%s", (int)err->kind, err->text);
}

static void say_warning(void *to, const char *sentence)
{
    (void)to;
    say("warn\t%s", sentence);
}

/* Blocks until the parent has ended, even when the main thread hangs in a driver. */
static void *watch_parent(void *unused)
{
    (void)unused;
    char byte;
    ssize_t count = 0;
    do
        count = read(STDIN_FILENO, &byte, 1);
    while (count > 0 || (count < 0 && errno == EINTR));
    _exit(EXIT_SUCCESS);
}

/* Runs in PortAudio's thread: copies and returns. No lock, no allocation, no call but the clock. */
static int on_frames(const void *samples, void *unused, unsigned long frame_count,
                     const PaStreamCallbackTimeInfo *times, PaStreamCallbackFlags flags,
                     void *state)
{
    (void)unused;
    (void)times; /* jitters and lies by driver: the sample count is the clock */
    struct capture *capture = state;
    const float *frames = samples;
    struct ring_block block = {.stamp_ns = clock_monotonic_ns(),
                               .flags = (flags & paInputOverflow) != 0 ? RING_OVERFLOW : 0};
    while (frame_count > 0) {
        unsigned long count = frame_count < CHUNK_FRAMES ? frame_count : CHUNK_FRAMES;
        block.first_frame = capture->frame;
        block.frame_count = (uint32_t)count;
        /* A full ring loses this block; the next one's first_frame tells how many frames. */
        if (frames != NULL && ring_write(capture->ring, &block, frames))
            block.flags = 0;
        capture->frame += count;
        frame_count -= count;
        frames = frames != NULL ? frames + count * capture->channels : NULL;
    }
    return paContinue;
}

static void on_finished(void *state)
{
    (void)state;
    say("stopped");
}

static bool device_error(struct error *err, const struct capture_device *device, PaError code)
{
    const PaHostErrorInfo *host = Pa_GetLastHostErrorInfo();
    const char *detail =
        code == paUnanticipatedHostError && host != NULL ? host->errorText : Pa_GetErrorText(code);
    if (code == paDeviceUnavailable)
        return error_set(err, ERROR_DEVICE,
                         "%s: in use by another program; close it, run `pasuspender`, or set the "
                         "card's profile to Off",
                         device->plain);
    if (code == paInvalidSampleRate || code == paInvalidChannelCount)
        return error_set(err, ERROR_USAGE, "%s: %s; `wane inputs` shows what it takes",
                         device->plain, detail);
    return error_set(err, ERROR_DEVICE, "%s: does not open (%s)", device->plain, detail);
}

static bool make_ring(struct capture *capture, double rate_hz, size_t *out_bytes, struct error *err)
{
    size_t bytes = ring_bytes(rate_hz, (int)capture->channels, CAPTURE_RING_S);
    if (ftruncate(CAPTURE_FD_RING, (off_t)bytes) != 0)
        return error_set(err, ERROR_MEMORY, "no shared memory for the samples (%s)",
                         strerror(errno));
    void *memory = mmap(NULL, bytes, PROT_READ | PROT_WRITE, MAP_SHARED, CAPTURE_FD_RING, 0);
    if (memory == MAP_FAILED)
        return error_set(err, ERROR_MEMORY, "no shared memory for the samples (%s)",
                         strerror(errno));
    capture->ring = ring_init(memory, bytes, (int)capture->channels);
    *out_bytes = bytes;
    return capture->ring != NULL || error_set(err, ERROR_INTERNAL, "the ring does not fit");
}

static bool open_stream(struct capture *capture, const struct capture_device *device,
                        double rate_hz, PaStream **out_stream, struct error *err)
{
    const PaDeviceInfo *info = Pa_GetDeviceInfo(device->index);
    double latency_s = info != NULL ? info->defaultHighInputLatency : LATENCY_MIN_S;
    PaStreamParameters input = {
        .device = device->index,
        .channelCount = (int)capture->channels,
        .sampleFormat = paFloat32, /* holds 24 bits exactly; PortAudio picks the card's best */
        .suggestedLatency = latency_s > LATENCY_MIN_S ? latency_s : LATENCY_MIN_S};
    PaError code = Pa_OpenStream(out_stream, &input, NULL, rate_hz, paFramesPerBufferUnspecified,
                                 paClipOff | paDitherOff, on_frames, capture);
    if (code != paNoError)
        return device_error(err, device, code);
    (void)Pa_SetStreamFinishedCallback(*out_stream, on_finished);
    return true;
}

/* Some drivers end a stream without the finished callback. */
static void wait_while_active(PaStream *stream)
{
    while (Pa_IsStreamActive(stream) == 1)
        clock_sleep_until(clock_monotonic_ns() + ACTIVE_POLL_NS);
    say("stopped");
}

static bool listen_to(const struct capture_device *device, const char *words, double rate_hz,
                      int channels, struct error *err)
{
    if (device->index < 0)
        return device_error(err, device, paDeviceUnavailable);
    if (rate_hz == 0.0)
        rate_hz = device->own_rate_hz;
    if (channels == 0)
        channels = device->card < 0 && device->channels > SERVER_CHANNELS ? SERVER_CHANNELS
                                                                          : device->channels;
    if (channels > device->channels)
        return error_set(err, ERROR_USAGE, "%s: has %d channels, not %d", device->plain,
                         device->channels, channels);
    struct capture capture = {.channels = (size_t)channels};
    size_t bytes = 0;
    PaStream *stream = NULL;
    if (!make_ring(&capture, rate_hz, &bytes, err) ||
        !open_stream(&capture, device, rate_hz, &stream, err))
        return false;
    PaError code = Pa_StartStream(stream);
    if (code != paNoError)
        return device_error(err, device, code);
    const PaStreamInfo *info = Pa_GetStreamInfo(stream);
    capture_device_warn(device, say_warning, NULL);
    say("ready\t%.9g\t%d\t%zu\t%s", info != NULL ? info->sampleRate : rate_hz, channels, bytes,
        words);
    wait_while_active(stream);
    return true;
}

static bool listen_by_name(const char *name, double rate_hz, int channels, struct error *err)
{
    struct capture_device *devices = NULL;
    size_t count = 0;
    if (!capture_devices_find(&devices, &count, err))
        return false;
    const struct capture_device *device = capture_devices_choose(devices, count, name, err);
    bool is_done = device != NULL && listen_to(device, capture_device_words(devices, count, device),
                                               rate_hz, channels, err);
    free(devices);
    return is_done;
}

static bool list(struct error *err)
{
    struct capture_device *devices = NULL;
    size_t count = 0;
    if (!capture_devices_find(&devices, &count, err))
        return false;
    for (size_t i = 0; i < count; i++) {
        const struct capture_device *device = &devices[i];
        double rates_hz[16];
        unsigned rate_count = capture_device_rates(device, rates_hz, 16);
        char rates[256] = "";
        for (unsigned k = 0; k < rate_count; k++)
            (void)snprintf(rates + strlen(rates), sizeof rates - strlen(rates), " %.9g",
                           rates_hz[k]);
        say("card\t%s\t%s\t%s\t%d\t%d\t%d\t%.9g\t%s", device->name,
            capture_device_words(devices, count, device), device->host, device->card < 0,
            device->is_default, device->channels, device->own_rate_hz, rates);
        capture_device_warn(device, say_warning, NULL);
    }
    say("done");
    free(devices);
    return true;
}

bool input_is_capture_process(int argc, char **argv)
{
    return argc >= 3 && strcmp(argv[1], CAPTURE_WORD) == 0;
}

/* PortAudio is never told to stop: leaving the process gives the device back at once, while
 * stopping a stream may hang for as long as its driver does. */
int input_capture_main(int argc, char **argv)
{
    pthread_t watcher;
    struct error err = {0};
    bool is_listening = argc == 6 && strcmp(argv[2], CAPTURE_LISTEN) == 0;
    if (!is_listening && strcmp(argv[2], CAPTURE_LIST) != 0)
        return 2;
    for (int fd = CAPTURE_FD_RING + 1; fd < FDS_TO_CLOSE; fd++)
        (void)close(fd); /* the daemon's sockets and files are none of this process's business */
    if (pthread_create(&watcher, NULL, watch_parent, NULL) != 0)
        return 1;
    PaError code = Pa_Initialize();
    bool is_done = false;
    if (code != paNoError)
        (void)error_set(&err, ERROR_DEVICE, "the sound system does not start (%s)",
                        Pa_GetErrorText(code));
    else if (is_listening)
        is_done =
            listen_by_name(argv[3], strtod(argv[4], NULL), (int)strtol(argv[5], NULL, 10), &err);
    else
        is_done = list(&err);
    if (!is_done)
        say_error(&err);
    _exit(is_done ? EXIT_SUCCESS : EXIT_FAILURE);
}
