/* The invented workshop: what lies on the simulated bench and how each of it rings. */
#ifndef SIM_PARTS_H
#define SIM_PARTS_H

#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

#define SIM_MODES_MAX 8

enum sim_part {
    SIM_GOBLET, /* glass, its two lowest modes doublets of 1.7 and 4.3 Hz */
    SIM_ROD,    /* brass, 300 mm x 10 mm, hung at the nodes of its first bending mode */
    SIM_PANEL,  /* spruce, quick to fade, close modes */
    SIM_TANK,   /* 22 mH and 100 nF, charged and let go by a switch */
    SIM_PART_COUNT,
    SIM_ALL = SIM_PART_COUNT, /* one after the other, some strikes each */
    SIM_MODE,                 /* a single mode of given f and zeta, for tests */
};

struct sim_part_mode {
    double f_hz, decay_per_s;
    double level_db; /* from an everyday blow, over the part's strongest mode */
    double lobes;    /* of a doublet's half: nodal diameters, 0 otherwise */
    bool is_crossed; /* its pattern is turned by a quarter lobe: the doublet's other half */
};

struct sim_part_data {
    struct sim_part_mode modes[SIM_MODES_MAX];
    size_t mode_count;
    double contact_s; /* of an everyday blow; 0: a switch, the ring starts at once */
    double blow_db;   /* noise that the blow itself radiates, rms, over the strongest mode */
    double angle_rad; /* where a tap usually lands, from an antinode of the uncrossed halves */
};

/* The part as this seed's workshop has it: each piece differs a little from its drawing. Pure. */
void sim_part_make(enum sim_part part, uint64_t seed, struct sim_part_data *out_data);

/* "goblet" "rod" "panel" "tank" "all" "mode". */
const char *sim_part_name(enum sim_part part);
/* false when the word is none of the first five. */
bool sim_part_from_name(const char *name, enum sim_part *out_part);

#endif
