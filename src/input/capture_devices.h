/* Sound-card inputs as PortAudio knows them. Capture process only, after Pa_Initialize. */
#ifndef CAPTURE_DEVICES_H
#define CAPTURE_DEVICES_H

#include "wane/error.h"
#include "wane/input.h"

struct capture_device {
    int index; /* PortAudio's; good in this process only. -1: a card that PortAudio does not show */
    char name[INPUT_NAME_MAX];   /* PortAudio's full name */
    char plain[INPUT_NAME_MAX];  /* without the " (hw:1,0)" tail, which changes with plug order */
    char stable[INPUT_NAME_MAX]; /* hw:CARD=Id,DEV=0; empty behind a server */
    char host[64];
    int card, device; /* ALSA's numbers; -1 behind a server */
    bool is_default;
    int channels;
    double own_rate_hz;
};

/* All inputs, hardware that another program holds included. *out_devices is the caller's to free.
 */
bool capture_devices_find(struct capture_device **out_devices, size_t *out_count,
                          struct error *err);

/* The one that `name` means: full, plain or stable name, else a part (letters of either case) that
 * fits one only. NULL and *err (with what there is) otherwise. */
const struct capture_device *capture_devices_choose(const struct capture_device *devices,
                                                    size_t count, const char *name,
                                                    struct error *err);

/* The shortest name that will mean this device again. */
const char *capture_device_words(const struct capture_device *devices, size_t count,
                                 const struct capture_device *device);

/* The rates that the hardware itself takes; 0 behind a server. Opens the device briefly. */
unsigned capture_device_rates(const struct capture_device *device, double *out_rates_hz,
                              unsigned rates_max);

/* Says one warning sentence after the other. */
typedef void capture_say(void *to, const char *sentence);
void capture_device_warn(const struct capture_device *device, capture_say *say, void *to);

#endif
