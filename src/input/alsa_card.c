#include "alsa_card.h"

#include <alsa/asoundlib.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#define SUBDEVICES_MAX 8

static snd_ctl_t *open_card(int card)
{
    char name[32];
    snd_ctl_t *control = NULL;
    (void)snprintf(name, sizeof name, "hw:%d", card);
    return snd_ctl_open(&control, name, SND_CTL_NONBLOCK) == 0 ? control : NULL;
}

bool alsa_card_id(int card, char *out_id, size_t out_size)
{
    snd_ctl_card_info_t *info = NULL;
    snd_ctl_t *control = open_card(card);
    if (control == NULL)
        return false;
    bool is_known = snd_ctl_card_info_malloc(&info) == 0 && snd_ctl_card_info(control, info) == 0;
    if (is_known)
        (void)snprintf(out_id, out_size, "%s", snd_ctl_card_info_get_id(info));
    snd_ctl_card_info_free(info);
    (void)snd_ctl_close(control);
    return is_known;
}

static bool is_on(snd_ctl_t *control, const snd_ctl_elem_id_t *id)
{
    snd_ctl_elem_info_t *info = NULL;
    snd_ctl_elem_value_t *value = NULL;
    bool on = false;
    if (snd_ctl_elem_info_malloc(&info) == 0 && snd_ctl_elem_value_malloc(&value) == 0) {
        snd_ctl_elem_info_set_id(info, id);
        snd_ctl_elem_value_set_id(value, id);
        if (snd_ctl_elem_info(control, info) == 0 && snd_ctl_elem_read(control, value) == 0 &&
            snd_ctl_elem_info_get_type(info) == SND_CTL_ELEM_TYPE_BOOLEAN) {
            for (unsigned i = 0; i < snd_ctl_elem_info_get_count(info); i++)
                on = on || snd_ctl_elem_value_get_boolean(value, i) != 0;
        }
    }
    snd_ctl_elem_value_free(value);
    snd_ctl_elem_info_free(info);
    return on;
}

static bool is_gain_control_name(const char *name)
{
    return strstr(name, "Auto Gain") != NULL || strstr(name, "AGC") != NULL;
}

static bool find_gain_control(snd_ctl_t *control, snd_ctl_elem_list_t *list, char *out_name,
                              size_t out_size)
{
    bool is_found = false;
    snd_ctl_elem_id_t *id = NULL;
    if (snd_ctl_elem_id_malloc(&id) != 0)
        return false;
    for (unsigned i = 0; i < snd_ctl_elem_list_get_used(list) && !is_found; i++) {
        snd_ctl_elem_list_get_id(list, i, id);
        const char *name = snd_ctl_elem_id_get_name(id);
        is_found = is_gain_control_name(name) && is_on(control, id);
        if (is_found)
            (void)snprintf(out_name, out_size, "%s", name);
    }
    snd_ctl_elem_id_free(id);
    return is_found;
}

bool alsa_card_gain_control(int card, char *out_name, size_t out_size)
{
    snd_ctl_elem_list_t *list = NULL;
    bool is_found = false;
    snd_ctl_t *control = open_card(card);
    if (control == NULL)
        return false;
    if (snd_ctl_elem_list_malloc(&list) == 0 && snd_ctl_elem_list(control, list) == 0 &&
        snd_ctl_elem_list_alloc_space(list, snd_ctl_elem_list_get_count(list)) == 0) {
        if (snd_ctl_elem_list(control, list) == 0)
            is_found = find_gain_control(control, list, out_name, out_size);
        snd_ctl_elem_list_free_space(list);
    }
    snd_ctl_elem_list_free(list);
    (void)snd_ctl_close(control);
    return is_found;
}

static long owner_of(const char *path)
{
    FILE *status = fopen(path, "re");
    if (status == NULL)
        return 0;
    char line[128];
    long pid = 0;
    while (pid == 0 && fgets(line, sizeof line, status) != NULL) {
        if (strncmp(line, "owner_pid", 9) == 0 && strchr(line, ':') != NULL)
            pid = strtol(strchr(line, ':') + 1, NULL, 10);
    }
    (void)fclose(status);
    return pid;
}

bool alsa_card_holder(const char *root, int card, int device, char *out_holder, size_t out_size)
{
    long pid = 0;
    for (int sub = 0; sub < SUBDEVICES_MAX && pid == 0; sub++) {
        char path[512];
        (void)snprintf(path, sizeof path, "%s/proc/asound/card%d/pcm%dc/sub%d/status", root, card,
                       device, sub);
        pid = owner_of(path);
    }
    if (pid <= 0)
        return false;
    char path[512], program[64] = "another program";
    (void)snprintf(path, sizeof path, "%s/proc/%ld/comm", root, pid);
    FILE *comm = fopen(path, "re");
    if (comm != NULL) {
        if (fgets(program, sizeof program, comm) != NULL)
            program[strcspn(program, "\n")] = '\0';
        (void)fclose(comm);
    }
    (void)snprintf(out_holder, out_size, "%s, process %ld", program, pid);
    return true;
}

static bool next_device(int card, int *device)
{
    snd_pcm_info_t *info = NULL;
    snd_ctl_t *control = open_card(card);
    bool is_found = false;
    if (control == NULL)
        return false;
    if (snd_pcm_info_malloc(&info) == 0) {
        while (!is_found && snd_ctl_pcm_next_device(control, device) == 0 && *device >= 0) {
            snd_pcm_info_set_device(info, (unsigned)*device);
            snd_pcm_info_set_subdevice(info, 0);
            snd_pcm_info_set_stream(info, SND_PCM_STREAM_CAPTURE);
            is_found = snd_ctl_pcm_info(control, info) == 0;
        }
    }
    snd_pcm_info_free(info);
    (void)snd_ctl_close(control);
    return is_found;
}

bool alsa_card_next_capture(int *card, int *device)
{
    if (*card >= 0 && next_device(*card, device))
        return true;
    while (snd_card_next(card) == 0 && *card >= 0) {
        *device = -1;
        if (next_device(*card, device))
            return true;
    }
    return false;
}
