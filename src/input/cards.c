/* The list of sound-card inputs, made by a process of its own: PortAudio's list is frozen when it
 * starts, and asking it again in a process that listens would close its streams. */
#include "capture.h"
#include "wane/clock.h"

#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#define PATIENCE_NS (5 * CLOCK_NS_PER_S)
#define POLL_MS     20
#define CARDS_MAX   256
#define FIELDS      9

struct listing {
    struct input_card *cards;
    size_t count, capacity;
    bool is_done;
};

static struct input_card *add_card(struct listing *listing)
{
    if (listing->count == listing->capacity) {
        size_t capacity = listing->capacity == 0 ? 8 : listing->capacity * 2;
        struct input_card *grown = realloc(listing->cards, capacity * sizeof *grown);
        if (grown == NULL || capacity > CARDS_MAX) {
            listing->cards = grown != NULL ? grown : listing->cards;
            return NULL;
        }
        listing->cards = grown;
        listing->capacity = capacity;
    }
    struct input_card *card = &listing->cards[listing->count++];
    *card = (struct input_card){0};
    return card;
}

static void fill_rates(struct input_card *card, const char *text)
{
    size_t most = sizeof card->rates_hz / sizeof card->rates_hz[0];
    while (card->rate_count < most) {
        char *end = NULL;
        double rate_hz = strtod(text, &end);
        if (end == text)
            return;
        card->rates_hz[card->rate_count++] = rate_hz;
        text = end;
    }
}

/* "card NAME WORDS HOST SERVER DEFAULT CHANNELS RATE RATES" */
static bool take_card(struct listing *listing, char **fields, struct error *err)
{
    struct input_card *card = add_card(listing);
    if (card == NULL)
        return error_set(err, ERROR_LIMIT, "more than %d sound-card inputs", CARDS_MAX);
    (void)snprintf(card->name, sizeof card->name, "%s", fields[1]);
    (void)snprintf(card->words, sizeof card->words, "%s", fields[2]);
    (void)snprintf(card->host, sizeof card->host, "%s", fields[3]);
    card->is_behind_server = strcmp(fields[4], "1") == 0;
    card->is_default = strcmp(fields[5], "1") == 0;
    card->channels = (int)strtol(fields[6], NULL, 10);
    card->rate_hz = strtod(fields[7], NULL);
    fill_rates(card, fields[8]);
    return true;
}

static bool take_line(struct listing *listing, char *line, struct error *err)
{
    char *fields[FIELDS];
    size_t count = capture_split(line, fields, FIELDS);
    if (strcmp(fields[0], "card") == 0 && count == FIELDS)
        return take_card(listing, fields, err);
    if (strcmp(fields[0], "warn") == 0 && count >= 2 && listing->count > 0) {
        struct input_card *card = &listing->cards[listing->count - 1];
        if (card->warning_count < INPUT_WARNINGS_MAX)
            (void)snprintf(card->warnings[card->warning_count++], INPUT_WARNING_MAX, "%s",
                           fields[1]);
    }
    if (strcmp(fields[0], "error") == 0 && count >= 3)
        return error_set(err, (enum error_kind)strtol(fields[1], NULL, 10), "%s", fields[2]);
    if (strcmp(fields[0], "done") == 0)
        listing->is_done = true;
    return true;
}

static bool collect(struct capture_child *child, struct listing *listing, struct error *err)
{
    char line[CAPTURE_LINE_MAX];
    int64_t until = clock_monotonic_ns() + PATIENCE_NS;
    while (!listing->is_done) {
        if (capture_child_line(child, line, sizeof line) != NULL) {
            if (!take_line(listing, line, err))
                return false;
            continue;
        }
        if (child->is_silent)
            return error_set(err, ERROR_DEVICE, "the sound system crashed while it was listed");
        if (clock_monotonic_ns() > until)
            return error_set(err, ERROR_DEVICE,
                             "the sound system does not answer (a driver or server hangs)");
        capture_child_wait(child, POLL_MS);
    }
    return true;
}

bool input_list_cards(struct input_card **out_cards, size_t *out_count, struct error *err)
{
    static const char *const words[] = {CAPTURE_LIST};
    struct capture_child child;
    struct listing listing = {0};
    if (!capture_child_start(&child, words, 1, err))
        return false;
    bool is_done = collect(&child, &listing, err);
    (void)capture_child_end(&child);
    if (!is_done) {
        free(listing.cards);
        return false;
    }
    *out_cards = listing.cards;
    *out_count = listing.count;
    return true;
}
