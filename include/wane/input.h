/* Where samples come from: one interface, three drivers (sound card, recording, simulated bench).
 * Pull style: whoever listens asks for the next block. An input never judges the signal.
 *
 * One input belongs to one thread at a time. A sound card is read by a process of its own (the same
 * program, started again): the main() of every program that opens inputs begins with
 *
 *     if (input_is_capture_process(argc, argv))
 *         return input_capture_main(argc, argv);
 */
#ifndef WANE_INPUT_H
#define WANE_INPUT_H

#include "wane/error.h"
#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

#define INPUT_NAME_MAX     256
#define INPUT_WARNING_MAX  200
#define INPUT_WARNINGS_MAX 8
#define INPUT_CHANNELS_MAX 64
#define INPUT_RATE_MIN_HZ  1000.0
#define INPUT_RATE_MAX_HZ  768000.0

enum input_kind { INPUT_SIMULATED, INPUT_RECORDING, INPUT_CARD };

/* NONE: nothing more will come (a recording that has ended). */
enum input_state { INPUT_LISTENING, INPUT_LOST, INPUT_NONE };

/* LIVE: frames come when a card would give them. FAST: as fast as they can be made or read. */
enum input_pace { INPUT_PACE_LIVE, INPUT_PACE_FAST };

/* Samples without a header: little endian, interleaved. */
enum input_raw { INPUT_RAW_NONE, INPUT_RAW_S16, INPUT_RAW_S24, INPUT_RAW_S32, INPUT_RAW_F32 };

/* What to open. = {.name = "..."} is valid: own rate, own channels, live pace.
 * name: "simulated"; "-" (a recording on standard input); a path: anything that holds a slash, ends
 * like a recording (.wav .flac ...), names a file that exists, or has `raw` set; else a sound card:
 * its name, or a part of it that fits one card only. */
struct input_choice {
    const char *name;     /* borrowed during input_open only */
    double rate_hz;       /* 0: own; a card behind a sound server: 48000. Needed with raw */
    int channels;         /* 0: own; a card behind a sound server: 2. Needed with raw */
    enum input_raw raw;   /* recordings only */
    enum input_pace pace; /* a card is always live */
    uint64_t seed;        /* simulated bench only; the same seed gives the same samples */
};

/* What an input says of itself. Plain data: copy it to hand it to another thread. */
struct input_info {
    enum input_kind kind;
    char name[INPUT_NAME_MAX]; /* UTF-8; a card's full name, a recording's path, "simulated" */
    enum input_state state;
    double rate_hz;
    int channels;
    unsigned bits;        /* true bits of a sample; 0 while not known */
    uint64_t frame_count; /* frames that a recording says it has; 0: not known, or endless */
    uint64_t lost_frames; /* all that were counted as lost since it was opened */
    /* Each one sentence, no full stop. They may grow in number while it is read. */
    char warnings[INPUT_WARNINGS_MAX][INPUT_WARNING_MAX];
    unsigned warning_count;
};

enum input_event {
    INPUT_NOTHING, /* the time was over before anything came */
    INPUT_FRAMES,  /* frames [frame_count x channels] */
    INPUT_GAP,   /* frames are missing before what comes next: lost_frames, 0 = unknown how many */
    INPUT_GONE,  /* the card is lost; go on reading, it is tried again every second */
    INPUT_BACK,  /* the card is back; lost_frames: missed meanwhile, by the monotonic clock */
    INPUT_ENDED, /* nothing more will come; every later read says so again */
};

struct input_block {
    enum input_event event;
    const float
        *frames;        /* interleaved, full scale is 1, all finite; borrowed until the next call */
    size_t frame_count; /* frames, not samples */
    /* Position of frames[0], or of the gap: frames since the input was opened, lost ones counted.
     */
    uint64_t first_frame;
    uint64_t lost_frames;
    int64_t arrived_ns; /* monotonic clock when the block's last frame had come (clock.h) */
    const char *text;   /* GONE: why, one sentence; else NULL. Borrowed until the next call */
};

struct input;

/* Opens an input. NULL and *err when it cannot be opened: ERROR_USAGE (wrong choice),
 * ERROR_NOT_FOUND (no such file or card; says which cards exist), ERROR_DATA (not a recording),
 * ERROR_DEVICE (the card does not open), ERROR_LIMIT, ERROR_MEMORY. May take seconds for a card
 * whose driver hangs (10 at most), and for "-" as long as its copy takes. */
struct input *input_open(const struct input_choice *choice, struct error *err);

/* The next block or event; waits up to timeout_ms (0: does not wait). A recording or the simulated
 * bench at fast pace never waits. Blocks hold at most 65536 frames, at live pace some 10 ms.
 * Fails when the recording cannot be read further (ERROR_DATA) or the bench or memory fails; a card
 * never fails, it is lost and comes back. After a failure only input_close is allowed. */
bool input_read(struct input *input, int timeout_ms, struct input_block *out_block,
                struct error *err);

/* What is known of it now. Borrowed until the next call with this input. */
const struct input_info *input_get_info(const struct input *input);

/* Ends it within a second, a hanging driver's process is killed. NULL is allowed. */
void input_close(struct input *input);

/* "simulated" "recording" "card"; "listening" "lost" "none". */
const char *input_kind_name(enum input_kind kind);
const char *input_state_name(enum input_state state);
/* "s16" "s24" "s32" "f32"; false when the word is none of them. */
bool input_raw_from_name(const char *word, enum input_raw *out_raw);

/* One sound-card input as the listing shows it. */
struct input_card {
    char name[INPUT_NAME_MAX];  /* full name */
    char words[INPUT_NAME_MAX]; /* what to put after `input =` or --input */
    char host[64];              /* host interface: "ALSA" "JACK" "OSS" ... */
    bool is_behind_server;      /* a sound server or plug-in: takes any rate and resamples */
    bool is_default;
    int channels;        /* most that it offers */
    double rate_hz;      /* that would be used without --rate */
    double rates_hz[16]; /* that a hardware device takes; none when behind a server */
    unsigned rate_count;
    char warnings[INPUT_WARNINGS_MAX][INPUT_WARNING_MAX];
    unsigned warning_count;
};

/* All sound-card inputs, found afresh by a short-lived process. *out_cards is the caller's to free;
 * *out_count may be 0, a normal state. Probes the hardware: a card that is being listened to (by us
 * too) may be missing from the list. Takes up to 5 s; fails (ERROR_DEVICE) when the driver hangs.
 * Any thread. */
bool input_list_cards(struct input_card **out_cards, size_t *out_count, struct error *err);

/* See the top of this file. input_capture_main returns the process's exit status. */
bool input_is_capture_process(int argc, char **argv);
int input_capture_main(int argc, char **argv);

#endif
