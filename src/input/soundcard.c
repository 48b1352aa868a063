/* A sound card as an input: looks after the capture process, which alone talks to the driver.
 *
 *            ready, then frames                 no frames, "stopped", or the process ended
 *   OPENING ────────────────────▶ LISTENING ────────────────────────────────────────┐
 *      ▲                              ▲                                             │
 *      │ each second                  │ first frames of a new process               ▼
 *      └──────────────────────────────┴───────────────────────── LOST (says GONE once)
 *
 * Invariant: every frame that the driver gave is handed out once, in order, or told as lost. */
#include "capture.h"
#include "clock_check.h"
#include "input_drivers.h"
#include "signal_check.h"
#include "wane/clock.h"
#include "wane/ring.h"

#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/mman.h>
#include <sys/stat.h>
#include <sys/wait.h>

#define MS               INT64_C(1000000)
#define POLL_MS          8
#define POLL_LEAST_MS    5
#define POLL_MOST_MS     20
#define OPEN_PATIENCE_NS (8 * CLOCK_NS_PER_S) /* probing many cards takes PortAudio seconds */
#define SILENCE_NS       CLOCK_NS_PER_S /* no frames for so long: lost; blocks come each 25 ms or so */
#define RETRY_NS         CLOCK_NS_PER_S
#define ATTEMPT_NS       (2 * CLOCK_NS_PER_S) /* a new process that shows no frames by then hangs */
#define BLOCK_FRAMES_MAX 8192
#define LEFT_BEHIND_MAX  4

struct soundcard {
    struct capture_child child;
    struct ring *ring;
    size_t ring_bytes;
    char words[INPUT_NAME_MAX]; /* that mean this card again */
    double rate_hz;             /* fixed by the first opening, as are the channels */
    int channels;
    bool is_lost;
    int64_t attempt_ns;   /* when the process at hand was started */
    int64_t last_ns;      /* arrival of the newest frame */
    int64_t heard_ns;     /* when the ring last held something: the listener may be behind */
    uint64_t child_frame; /* the next frame's number as the process counts */
    float *frames;        /* [BLOCK_FRAMES_MAX x channels], the block at hand */
    int poll_ms;          /* half a block: a block waits no longer, and few looks are in vain */
    struct ring_block block;
    bool has_block; /* read, not handed out: a gap comes first */
    struct clock_check clock;
    struct signal_check signal;
    struct error why;                   /* of the loss, for INPUT_GONE */
    pid_t left_behind[LEFT_BEHIND_MAX]; /* stuck in their driver though killed */
};

static void detach(struct soundcard *card)
{
    if (card->ring != NULL)
        (void)munmap(card->ring, card->ring_bytes);
    card->ring = NULL;
    pid_t stuck = capture_child_end(&card->child);
    for (size_t i = 0; i < LEFT_BEHIND_MAX; i++) {
        pid_t *place = &card->left_behind[i];
        if (*place != 0 && waitpid(*place, NULL, WNOHANG) != 0)
            *place = 0;
        if (*place == 0 && stuck != 0) {
            *place = stuck;
            stuck = 0;
        }
    }
}

static bool attach(struct soundcard *card, size_t bytes, int channels, struct error *err)
{
    struct stat memory = {0};
    if (fstat(card->child.ring_fd, &memory) != 0 || (uint64_t)memory.st_size < bytes)
        return error_set(err, ERROR_INTERNAL, "%s: the capture process made no ring", card->words);
    void *map = mmap(NULL, bytes, PROT_READ | PROT_WRITE, MAP_SHARED, card->child.ring_fd, 0);
    if (map == MAP_FAILED)
        return error_set(err, ERROR_MEMORY, "%s: no memory for the samples", card->words);
    card->ring = ring_attach(map, bytes);
    card->ring_bytes = bytes;
    if (card->ring == NULL || ring_channels(card->ring) != channels) {
        (void)munmap(map, bytes);
        card->ring = NULL;
        return error_set(err, ERROR_INTERNAL, "%s: the capture process made no ring", card->words);
    }
    card->child_frame = 0;
    return true;
}

static bool start(struct soundcard *card, struct error *err)
{
    char rate[32], channels[16];
    (void)snprintf(rate, sizeof rate, "%.9g", card->rate_hz);
    (void)snprintf(channels, sizeof channels, "%d", card->channels);
    const char *words[] = {CAPTURE_LISTEN, card->words, rate, channels};
    card->attempt_ns = clock_monotonic_ns();
    return capture_child_start(&card->child, words, 4, err);
}

/* "ready RATE CHANNELS RING_BYTES NAME" */
static bool take_ready(struct soundcard *card, char **fields, struct input_info *info,
                       struct error *err)
{
    double rate_hz = strtod(fields[1], NULL);
    int channels = (int)strtol(fields[2], NULL, 10);
    size_t bytes = (size_t)strtoull(fields[3], NULL, 10);
    if (card->frames != NULL &&
        (channels != card->channels || fabs(rate_hz - card->rate_hz) > 1e-3 * card->rate_hz))
        return error_set(err, ERROR_DEVICE, "%s: came back with %g Hz and %d channels", card->words,
                         rate_hz, channels);
    if (!attach(card, bytes, channels, err))
        return false;
    card->channels = channels;
    card->rate_hz = rate_hz;
    (void)snprintf(card->words, sizeof card->words, "%s", fields[4]);
    (void)snprintf(info->name, sizeof info->name, "%s", fields[4]);
    return true;
}

enum news { NEWS_NONE, NEWS_READY, NEWS_BAD };

/* What the process has said since the last look. BAD: it cannot go on, *err says why. */
static enum news hear(struct soundcard *card, struct input_info *info, struct error *err)
{
    char line[CAPTURE_LINE_MAX];
    char *fields[5];
    while (capture_child_line(&card->child, line, sizeof line) != NULL) {
        size_t count = capture_split(line, fields, 5);
        if (strcmp(fields[0], "ready") == 0 && count == 5)
            return take_ready(card, fields, info, err) ? NEWS_READY : NEWS_BAD;
        if (strcmp(fields[0], "warn") == 0 && count >= 2)
            input_warn(info, "%s", fields[1]);
        if (strcmp(fields[0], "error") == 0 && count >= 3) {
            (void)error_set(err, (enum error_kind)strtol(fields[1], NULL, 10), "%s", fields[2]);
            return NEWS_BAD;
        }
        if (strcmp(fields[0], "stopped") == 0) {
            (void)error_set(err, ERROR_DEVICE,
                            "the driver ended the stream: the card was pulled "
                            "out, or its server stopped");
            return NEWS_BAD;
        }
    }
    if (!card->child.is_silent)
        return NEWS_NONE;
    (void)error_set(err, ERROR_DEVICE, "the card's driver crashed");
    return NEWS_BAD;
}

static bool wait_until_ready(struct soundcard *card, struct input_info *info, struct error *err)
{
    int64_t until = clock_monotonic_ns() + OPEN_PATIENCE_NS;
    for (;;) {
        enum news news = hear(card, info, err);
        if (news == NEWS_READY)
            return true;
        if (news == NEWS_BAD)
            return false;
        if (clock_monotonic_ns() > until)
            return error_set(err, ERROR_DEVICE, "%s: the sound driver does not answer",
                             card->words);
        capture_child_wait(&card->child, POLL_MS);
    }
}

void *soundcard_open(const struct input_choice *choice, struct input_info *info, struct error *err)
{
    struct soundcard *card = calloc(1, sizeof *card);
    if (card == NULL) {
        (void)error_set(err, ERROR_MEMORY, "%s: out of memory", choice->name);
        return NULL;
    }
    capture_child_init(&card->child);
    card->poll_ms = POLL_MS;
    (void)snprintf(card->words, sizeof card->words, "%s", choice->name);
    card->rate_hz = choice->rate_hz;
    card->channels = choice->channels;
    if (!start(card, err) || !wait_until_ready(card, info, err)) {
        soundcard_close(card);
        return NULL;
    }
    card->frames = malloc((size_t)card->channels * BLOCK_FRAMES_MAX * sizeof *card->frames);
    if (card->frames == NULL) {
        (void)error_set(err, ERROR_MEMORY, "%s: out of memory", choice->name);
        soundcard_close(card);
        return NULL;
    }
    card->last_ns = clock_monotonic_ns();
    card->heard_ns = card->last_ns;
    clock_check_init(&card->clock, card->rate_hz);
    signal_check_init(&card->signal, card->rate_hz);
    info->state = INPUT_LISTENING;
    info->rate_hz = card->rate_hz;
    info->channels = card->channels;
    return card;
}

void soundcard_close(void *state)
{
    struct soundcard *card = state;
    if (card == NULL)
        return;
    detach(card);
    free(card->frames);
    free(card);
}

static void go_lost(struct soundcard *card, struct input_info *info, const struct error *why,
                    struct input_block *out_block)
{
    detach(card);
    card->is_lost = true;
    card->has_block = false;
    info->state = INPUT_LOST;
    card->why = *why;
    out_block->event = INPUT_GONE;
    out_block->text = card->why.text;
    out_block->arrived_ns = clock_monotonic_ns();
}

static void check_signal(struct soundcard *card, struct input_info *info)
{
    if (signal_check_block(&card->signal, card->frames, card->block.frame_count,
                           (size_t)card->channels) != SIGNAL_DECIDED)
        return;
    info->bits = signal_check_bits(&card->signal);
    if (card->channels == 2 && !card->signal.channels_differ)
        input_warn(info, "both channels carry the same signal: one microphone, sent twice");
    if (info->bits > 0 && info->bits <= 8)
        input_warn(info, "only %u bits of each sample are used", info->bits);
}

static void hand_out(struct soundcard *card, struct input_info *info, struct input_block *out_block)
{
    card->has_block = false;
    card->child_frame = card->block.first_frame + card->block.frame_count;
    out_block->event = INPUT_FRAMES;
    out_block->frames = card->frames;
    out_block->frame_count = card->block.frame_count;
    out_block->arrived_ns = card->block.stamp_ns;
    check_signal(card, info);
}

static void tell_gap(struct soundcard *card, uint64_t lost_frames, struct input_block *out_block)
{
    out_block->event = INPUT_GAP;
    out_block->lost_frames = lost_frames;
    out_block->arrived_ns = card->block.stamp_ns;
}

/* The first frames of a new process: the card is back. What was missed is known by the clock. */
static void come_back(struct soundcard *card, struct input_info *info,
                      struct input_block *out_block)
{
    double block_s = (double)card->block.frame_count / card->rate_hz;
    double away_s =
        (double)(card->block.stamp_ns - card->last_ns) / (double)CLOCK_NS_PER_S - block_s;
    card->is_lost = false;
    info->state = INPUT_LISTENING;
    clock_check_init(&card->clock, card->rate_hz);
    card->child_frame = card->block.first_frame;
    out_block->event = INPUT_BACK;
    out_block->lost_frames = away_s > 0.0 ? (uint64_t)llround(away_s * card->rate_hz) : 0;
    out_block->arrived_ns = card->block.stamp_ns;
}

static int half_block_ms(const struct soundcard *card)
{
    double half_ms = 500.0 * (double)card->block.frame_count / card->rate_hz;
    return (int)fmin(fmax(half_ms, POLL_LEAST_MS), POLL_MOST_MS);
}

/* Makes the next event from the ring; false when it is empty. */
static bool take_from_ring(struct soundcard *card, struct input_info *info,
                           struct input_block *out_block)
{
    if (card->has_block) {
        hand_out(card, info, out_block);
        return true;
    }
    if (card->ring == NULL || !ring_read(card->ring, &card->block, card->frames, BLOCK_FRAMES_MAX))
        return false;
    card->has_block = true;
    card->heard_ns = clock_monotonic_ns();
    card->poll_ms = half_block_ms(card);
    if (card->is_lost) {
        come_back(card, info, out_block);
        card->last_ns = card->block.stamp_ns;
        return true;
    }
    card->last_ns = card->block.stamp_ns;
    uint64_t skipped = card->block.first_frame - card->child_frame;
    if ((card->block.flags & RING_OVERFLOW) != 0 || skipped > 0) {
        if (skipped == 0)
            clock_check_init(&card->clock, card->rate_hz);
        else
            (void)clock_check_block(&card->clock, skipped + card->block.frame_count,
                                    card->block.stamp_ns);
        card->child_frame = card->block.first_frame;
        tell_gap(card, skipped, out_block);
        return true;
    }
    uint64_t missing =
        clock_check_block(&card->clock, card->block.frame_count, card->block.stamp_ns);
    if (missing > 0) {
        tell_gap(card, missing, out_block);
        input_warn(info, "samples got lost without a word from the driver, by the clock");
        return true;
    }
    hand_out(card, info, out_block);
    return true;
}

/* While the card is away: a fresh process each second, one that hangs is killed. */
static void try_again(struct soundcard *card, struct input_info *info)
{
    int64_t age_ns = clock_monotonic_ns() - card->attempt_ns;
    struct error err = {0};
    if (card->child.pid != 0) {
        bool is_bad = hear(card, info, &err) == NEWS_BAD;
        if (is_bad || age_ns > ATTEMPT_NS)
            detach(card);
        return;
    }
    if (age_ns < RETRY_NS)
        return;
    if (!start(card, &err)) /* the system is short of something: the next second may be better */
        card->attempt_ns = clock_monotonic_ns();
}

/* One look at ring, messages and watchdog. true: *out_block holds an event. */
static bool look(struct soundcard *card, struct input_info *info, struct input_block *out_block)
{
    if (take_from_ring(card, info, out_block))
        return true;
    if (card->is_lost) {
        try_again(card, info);
        return false;
    }
    struct error err = {0};
    if (hear(card, info, &err) == NEWS_BAD) {
        /* What came before the end is still good. */
        if (take_from_ring(card, info, out_block))
            return true;
        go_lost(card, info, &err, out_block);
        return true;
    }
    if (clock_monotonic_ns() - card->heard_ns <= SILENCE_NS)
        return false;
    (void)error_set(&err, ERROR_DEVICE, "the card gives no samples any more");
    go_lost(card, info, &err, out_block);
    return true;
}

bool soundcard_read(void *state, int timeout_ms, struct input_info *info,
                    struct input_block *out_block, struct error *err)
{
    (void)err; /* a card never fails: it is lost and comes back */
    struct soundcard *card = state;
    int64_t until = clock_monotonic_ns() + timeout_ms * MS;
    for (;;) {
        if (look(card, info, out_block))
            return true;
        int64_t left_ms = (until - clock_monotonic_ns()) / MS;
        if (left_ms <= 0)
            return true;
        capture_child_wait(&card->child, left_ms < card->poll_ms ? (int)left_ms : card->poll_ms);
    }
}
