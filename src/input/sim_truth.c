/* Words and the JSON form of the truth. */
#include "input/simulated.h"
#include "wane/strike.h"

#include <math.h>
#include <string.h>

static const char *const defect_names[] = {"none",     "double-hit", "clipped", "soft",
                                           "restruck", "hum",        "cough",   "some"};

const char *sim_defect_name(enum sim_defect defect)
{
    return defect_names[defect];
}

bool sim_defect_from_name(const char *name, enum sim_defect *out_defect)
{
    for (int defect = SIM_NO_DEFECT; defect <= (int)SIM_SOME; defect++) {
        if (strcmp(name, defect_names[defect]) == 0) {
            *out_defect = (enum sim_defect)defect;
            return true;
        }
    }
    return false;
}

static void write_mode(struct json_writer *json, const struct sim_truth_mode *mode)
{
    double omega = 2 * WANE_PI * mode->f_hz;
    double zeta = mode->decay_per_s / hypot(omega, mode->decay_per_s);
    json_open_object(json, NULL);
    json_number(json, "f_hz", mode->f_hz, 15);
    json_number(json, "decay_per_s", mode->decay_per_s, 15);
    json_number(json, "q", 1 / (2 * zeta), 15);
    json_number(json, "zeta", zeta, 15);
    json_number(json, "level_dbfs", mode->level_dbfs, 9);
    json_number(json, "phase_rad", mode->phase_rad, 9);
    json_close_object(json);
}

static void write_disturbance(struct json_writer *json, const struct sim_event *event)
{
    json_string(json, "kind", event->kind == SIM_EVENT_HUM ? "hum" : "cough");
    json_number(json, "onset_s", event->onset_s, 15);
    json_number(json, "until_s", event->until_s, 15);
    json_number(json, "level_dbfs", 20 * log10(event->level), 5);
}

static void write_strike(struct json_writer *json, const struct sim_event *event)
{
    json_integer(json, "strike", (int64_t)event->number);
    json_number(json, "onset_s", event->onset_s, 15);
    json_number(json, "contact_s", event->contact_s, 6);
    json_string(json, "part", sim_part_name(event->part));
    json_string(json, "defect",
                event->defect == SIM_NO_DEFECT ? NULL : sim_defect_name(event->defect));
    if (event->defect == SIM_DOUBLE_HIT)
        json_number(json, "after_s", event->after_s, 9);
    json_open_array(json, "modes");
    for (size_t i = 0; i < event->mode_count; i++)
        write_mode(json, &event->modes[i]);
    json_close_array(json);
}

void sim_event_write(struct json_writer *json, const struct sim_event *event)
{
    json_open_object(json, NULL);
    json_integer(json, "channel", event->channel);
    if (event->kind == SIM_EVENT_STRIKE)
        write_strike(json, event);
    else
        write_disturbance(json, event);
    json_close_object(json);
}
