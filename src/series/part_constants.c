/* Which constants a part sheet's body and modes give. */
#include "series/limits.h"

#include <math.h>
#include <stdio.h>
#include <string.h>

struct ring ring_of_mode(const struct mode *mode, double clock_u_ppm)
{
    double f_clock = clock_u(QUANTITY_F_HZ, mode->f_hz, clock_u_ppm);
    double decay_clock = clock_u(QUANTITY_DECAY_PER_S, mode->decay_per_s, clock_u_ppm);
    struct ring ring = {{mode->f_hz, hypot(mode->f_u_hz, f_clock)},
                        {mode->decay_per_s, hypot(mode->decay_u_per_s, decay_clock)},
                        mode->f_decay_cov};
    /* The clock moves both alike. */
    if (isfinite(ring.f_decay_cov))
        ring.f_decay_cov += f_clock * decay_clock;
    return ring;
}

struct ring ring_of_series(const struct series_mode *mode, double clock_u_ppm)
{
    const struct sample_spread *f = &mode->stats[QUANTITY_F_HZ].spread;
    const struct sample_spread *decay = &mode->stats[QUANTITY_DECAY_PER_S].spread;
    struct ring none = {{0, 0}, {0, 0}, 0};
    if (f->n < 2)
        return none;
    double f_clock = clock_u(QUANTITY_F_HZ, f->mean, clock_u_ppm);
    double decay_clock = clock_u(QUANTITY_DECAY_PER_S, decay->mean, clock_u_ppm);
    return (struct ring){{f->mean, hypot(f->mean_u, f_clock)},
                         {decay->mean, hypot(decay->mean_u, decay_clock)},
                         f_clock * decay_clock};
}

struct list {
    struct part_constant *constants;
    unsigned count;
};

static struct constant *append(struct list *list, const char *name, const char *unit)
{
    struct part_constant *entry = &list->constants[list->count++];
    memset(entry, 0, sizeof *entry);
    entry->name = name;
    entry->unit = unit;
    return &entry->constant;
}

/* Of the entry that was appended last. */
static void settle(struct list *list, bool is_known, const struct error *err)
{
    struct part_constant *entry = &list->constants[list->count - 1];
    entry->is_known = is_known;
    if (!is_known)
        snprintf(entry->constant.remark, sizeof entry->constant.remark, "%s", err->text);
}

typedef bool modulus(const struct body *body, struct measured f_hz, struct constant *out_constant,
                     struct error *err);

static void add_modulus(struct list *list, const char *name, const char *unit, modulus *formula,
                        const struct body *body, const struct ring *ring)
{
    struct error err = {0};
    struct constant *constant = append(list, name, unit);
    settle(list, formula(body, ring->f_hz, constant, &err), &err);
}

static const struct ring *ring_of_motion(const struct part *part, const struct ring *rings,
                                         enum body_motion motion)
{
    for (unsigned i = 0; i < part->mode_count; i++)
        if (part->modes[i].motion == motion && rings[i].f_hz.value > 0)
            return &rings[i];
    return NULL;
}

static void add_body(struct list *list, const struct part *part, const struct ring *rings)
{
    const struct body *body = &part->body;
    const struct ring *flexure = ring_of_motion(part, rings, MOTION_FLEXURE);
    const struct ring *torsion = ring_of_motion(part, rings, MOTION_TORSION);
    const struct ring *lengthwise = ring_of_motion(part, rings, MOTION_LENGTHWISE);
    if (flexure != NULL && torsion != NULL) {
        struct error err = {0};
        struct constant *poisson = append(list, "Poisson's ratio", "");
        struct constant *youngs = append(list, "Young's modulus", "Pa");
        bool is_known = constant_poisson(body, flexure->f_hz, torsion->f_hz, poisson, youngs, &err);
        settle(list, is_known, &err);
        list->count--;
        settle(list, is_known, &err);
        list->count++;
    } else if (flexure != NULL) {
        add_modulus(list, "Young's modulus", "Pa", constant_youngs_modulus, body, flexure);
    }
    if (torsion != NULL)
        add_modulus(list, "shear modulus", "Pa", constant_shear_modulus, body, torsion);
    if (lengthwise != NULL) {
        add_modulus(list, "Young's modulus, lengthwise", "Pa", constant_lengthwise_modulus, body,
                    lengthwise);
        add_modulus(list, "speed of sound", "m/s", constant_sound_speed, body, lengthwise);
    }
}

static void add_tank(struct list *list, const struct body *body, const struct ring *ring)
{
    struct error err = {0};
    struct tank tank;
    memset(&tank, 0, sizeof tank);
    bool knows_c = body->capacitance_f.value > 0;
    bool is_known = constant_tank(body, ring, &tank, &err);
    *append(list, knows_c ? "inductance" : "capacitance", knows_c ? "H" : "F") = tank.other;
    settle(list, is_known, &err);
    *append(list, "loop resistance", "ohm") = tank.loop_ohm;
    settle(list, is_known, &err);
    *append(list, "Q without the input", "") = tank.q;
    settle(list, is_known, &err);
}

unsigned part_constants(const struct part *part, const struct ring *rings,
                        struct part_constant out_constants[PART_CONSTANTS_MAX])
{
    struct list list = {out_constants, 0};
    if (part->body.shape == BODY_TANK && part->mode_count > 0)
        add_tank(&list, &part->body, &rings[0]);
    else if (part->body.shape != BODY_NONE)
        add_body(&list, part, rings);
    return list.count;
}

void constants_write_json(struct json_writer *json, const char *key,
                          const struct part_constant *constants, unsigned count)
{
    json_open_array(json, key);
    for (unsigned i = 0; i < count; i++) {
        const struct constant *constant = &constants[i].constant;
        json_open_object(json, NULL);
        json_string(json, "name", constants[i].name);
        json_string(json, "unit", constants[i].unit);
        if (constants[i].is_known) {
            json_measured(json, "value", constant->result.value, constant->result.u);
            json_number(json, "u", constant->result.u, 4);
        } else {
            json_null(json, "value");
            json_null(json, "u");
        }
        json_string(json, "source", constant->source);
        json_string(json, "remark", constant->remark[0] == '\0' ? NULL : constant->remark);
        json_open_array(json, "budget");
        for (size_t k = 0; k < constant->budget.count; k++) {
            json_open_object(json, NULL);
            json_string(json, "of", constant->budget.lines[k].name);
            json_number(json, "share", constant->budget.lines[k].share, 4);
            json_close_object(json);
        }
        json_close_array(json);
        json_close_object(json);
    }
    json_close_array(json);
}

struct measured constant_for_people(const struct part_constant *constant, const char **out_unit)
{
    static const struct {
        const char *unit, *shown;
        double scale;
    } prefixes[] = {{"Pa", "GPa", 1e-9}, {"H", "mH", 1e3}, {"F", "nF", 1e9}};
    struct measured result = constant->constant.result;
    *out_unit = constant->unit;
    for (size_t i = 0; i < sizeof prefixes / sizeof prefixes[0]; i++) {
        if (strcmp(constant->unit, prefixes[i].unit) != 0)
            continue;
        *out_unit = prefixes[i].shown;
        result.value *= prefixes[i].scale;
        result.u *= prefixes[i].scale;
    }
    return result;
}
