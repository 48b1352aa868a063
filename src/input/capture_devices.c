#include "capture_devices.h"
#include "alsa_card.h"

#include <ctype.h>
#include <portaudio.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#define OWN_RATE_HZ                                                                                \
    48000.0 /* where the hardware has it: the family most converters are made for                  \
             */
#define SERVER_RATE_HZ 48000.0
#define PROBE_LATENCY  0.1

/* Names come from drivers: no control characters may break the lines of our protocol. */
static void copy_name(char *out, size_t out_size, const char *name)
{
    (void)snprintf(out, out_size, "%s", name);
    for (char *c = out; *c != '\0'; c++) {
        if ((unsigned char)*c < ' ' || *c == 0x7f)
            *c = ' ';
    }
}

/* "Some card: USB Audio (hw:1,0)" */
static void part_name(struct capture_device *device)
{
    device->card = -1;
    device->device = -1;
    copy_name(device->plain, sizeof device->plain, device->name);
    char *tail = NULL;
    for (char *at = strstr(device->plain, " (hw:"); at != NULL; at = strstr(at + 1, " (hw:"))
        tail = at;
    if (tail == NULL)
        return;
    char *end = NULL;
    long card = strtol(tail + 5, &end, 10);
    if (end == tail + 5 || *end != ',' || card < 0 || card > 1000)
        return;
    device->card = (int)card;
    device->device = (int)strtol(end + 1, NULL, 10);
    *tail = '\0';
    char id[64];
    if (alsa_card_id(device->card, id, sizeof id))
        (void)snprintf(device->stable, sizeof device->stable, "hw:CARD=%s,DEV=%d", id,
                       device->device);
}

static PaStreamParameters parameters_of(const struct capture_device *device, int channels)
{
    return (PaStreamParameters){.device = device->index,
                                .channelCount = channels,
                                .sampleFormat = paFloat32,
                                .suggestedLatency = PROBE_LATENCY};
}

static bool takes_rate(const struct capture_device *device, double rate_hz)
{
    PaStreamParameters input = parameters_of(device, device->channels);
    return Pa_IsFormatSupported(&input, NULL, rate_hz) == paFormatIsSupported;
}

static void fill_device(struct capture_device *device, int i, const PaDeviceInfo *info)
{
    const PaHostApiInfo *host = Pa_GetHostApiInfo(info->hostApi);
    device->index = i;
    copy_name(device->name, sizeof device->name, info->name);
    copy_name(device->host, sizeof device->host, host != NULL ? host->name : "unknown");
    device->is_default = i == Pa_GetDefaultInputDevice();
    device->channels =
        info->maxInputChannels < INPUT_CHANNELS_MAX ? info->maxInputChannels : INPUT_CHANNELS_MAX;
    part_name(device);
    device->own_rate_hz = device->card < 0                  ? SERVER_RATE_HZ
                          : takes_rate(device, OWN_RATE_HZ) ? OWN_RATE_HZ
                                                            : info->defaultSampleRate;
}

static bool is_listed(const struct capture_device *devices, size_t count, int card, int device)
{
    for (size_t i = 0; i < count; i++) {
        if (devices[i].card == card && devices[i].device == device)
            return true;
    }
    return false;
}

/* PortAudio leaves out a card that it cannot open. */
static void add_held(struct capture_device *devices, size_t *count, size_t count_max)
{
    int card = -1, number = -1;
    while (*count < count_max && alsa_card_next_capture(&card, &number)) {
        if (is_listed(devices, *count, card, number))
            continue;
        struct capture_device *device = &devices[(*count)++];
        *device = (struct capture_device){.index = -1, .card = card, .device = number};
        char id[64] = "?";
        (void)alsa_card_id(card, id, sizeof id);
        (void)snprintf(device->stable, sizeof device->stable, "hw:CARD=%s,DEV=%d", id, number);
        (void)snprintf(device->name, sizeof device->name, "%s", device->stable);
        (void)snprintf(device->plain, sizeof device->plain, "%s", device->stable);
        (void)snprintf(device->host, sizeof device->host, "ALSA");
    }
}

bool capture_devices_find(struct capture_device **out_devices, size_t *out_count, struct error *err)
{
    int all = Pa_GetDeviceCount();
    size_t held_max = 16, count = 0;
    size_t most = (all > 0 ? (size_t)all : 0) + held_max;
    struct capture_device *devices = calloc(most, sizeof *devices);
    if (devices == NULL)
        return error_set(err, ERROR_MEMORY, "out of memory for the list of inputs");
    for (int i = 0; i < all; i++) {
        const PaDeviceInfo *info = Pa_GetDeviceInfo(i);
        if (info != NULL && info->maxInputChannels > 0)
            fill_device(&devices[count++], i, info);
    }
    add_held(devices, &count, most);
    *out_devices = devices;
    *out_count = count;
    return true;
}

static bool contains(const char *whole, const char *part)
{
    size_t length = strlen(part);
    for (; strlen(whole) >= length; whole++) {
        size_t i = 0;
        while (i < length && tolower((unsigned char)whole[i]) == tolower((unsigned char)part[i]))
            i++;
        if (i == length)
            return true;
    }
    return false;
}

static bool is_exactly(const struct capture_device *device, const char *name)
{
    return strcmp(device->name, name) == 0 || strcmp(device->plain, name) == 0 ||
           (device->stable[0] != '\0' && strcmp(device->stable, name) == 0);
}

static void append_names(struct error *err, const struct capture_device *devices, size_t count,
                         const char *part)
{
    const char *before = "";
    for (size_t i = 0; i < count; i++) {
        size_t used = strlen(err->text);
        const char *words = capture_device_words(devices, count, &devices[i]);
        if (part != NULL && !contains(devices[i].name, part))
            continue;
        if (used + strlen(words) + 12 > sizeof err->text) {
            (void)snprintf(err->text + used, sizeof err->text - used, " ...");
            return;
        }
        (void)snprintf(err->text + used, sizeof err->text - used, "%s `%s`", before, words);
        before = ",";
    }
}

const struct capture_device *capture_devices_choose(const struct capture_device *devices,
                                                    size_t count, const char *name,
                                                    struct error *err)
{
    const struct capture_device *chosen = NULL;
    size_t fits = 0;
    for (size_t i = 0; i < count; i++) {
        if (!is_exactly(&devices[i], name))
            continue;
        /* One card may show through several host interfaces; ALSA's comes first in the list. */
        if (chosen != NULL && strcmp(chosen->host, devices[i].host) != 0)
            continue;
        chosen = chosen == NULL ? &devices[i] : chosen;
        fits++;
    }
    for (size_t i = 0; i < count && chosen == NULL; i++)
        fits += contains(devices[i].name, name) ? 1 : 0;
    for (size_t i = 0; i < count && chosen == NULL && fits == 1; i++)
        chosen = contains(devices[i].name, name) ? &devices[i] : NULL;
    if (fits == 1)
        return chosen;
    struct error none = {0};
    if (count == 0) {
        (void)error_set(
            &none, ERROR_NOT_FOUND,
            "no sound card named `%.60s`: this machine shows no sound-card input at all", name);
    } else if (fits == 0) {
        (void)error_set(&none, ERROR_NOT_FOUND, "no sound card named `%.60s`; there are", name);
        append_names(&none, devices, count, NULL);
    } else {
        (void)error_set(&none, ERROR_USAGE, "`%.60s` fits %zu sound cards:", name, fits);
        append_names(&none, devices, count, name);
    }
    if (err != NULL)
        *err = none;
    return NULL;
}

const char *capture_device_words(const struct capture_device *devices, size_t count,
                                 const struct capture_device *device)
{
    size_t same = 0;
    for (size_t i = 0; i < count; i++)
        same += strcmp(devices[i].plain, device->plain) == 0 ? 1 : 0;
    return same > 1 && device->stable[0] != '\0' ? device->stable : device->plain;
}

unsigned capture_device_rates(const struct capture_device *device, double *out_rates_hz,
                              unsigned rates_max)
{
    static const double rates_hz[] = {8000.0,  16000.0, 22050.0,  32000.0,  44100.0, 48000.0,
                                      88200.0, 96000.0, 176400.0, 192000.0, 384000.0};
    unsigned count = 0;
    if (device->card < 0 || device->index < 0)
        return 0;
    for (size_t i = 0; i < sizeof rates_hz / sizeof rates_hz[0] && count < rates_max; i++) {
        if (takes_rate(device, rates_hz[i]))
            out_rates_hz[count++] = rates_hz[i];
    }
    return count;
}

void capture_device_warn(const struct capture_device *device, capture_say *say, void *to)
{
    char text[INPUT_WARNING_MAX], detail[96], control[48]; /* ALSA: 44 bytes at most */
    if (device->card < 0) {
        say(to, "goes through a sound server or plug-in, which resamples without a word and may "
                "process the sound: a hardware entry of `wane inputs`, if there is one, is better");
        return;
    }
    if (device->index < 0) {
        if (alsa_card_holder("", device->card, device->device, detail, sizeof detail))
            (void)snprintf(text, sizeof text, "is in use by %s: close it first", detail);
        else
            (void)snprintf(text, sizeof text,
                           "does not open: in use by another program, or no right to it (is the "
                           "user in the group `audio`?)");
        say(to, text);
        return;
    }
    if (alsa_card_gain_control(device->card, control, sizeof control)) {
        (void)snprintf(text, sizeof text,
                       "`%s` is on and bends every decay: amixer -c %d cset name='%s' off", control,
                       device->card, control);
        say(to, text);
    }
}
