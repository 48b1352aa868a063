/* The sample at which a blow or ring begins: a first estimate, which the fit
 * refines. */
#ifndef WANE_DETECT_ONSET_H
#define WANE_DETECT_ONSET_H

#include <stddef.h>

#define ONSET_ORDER 16

/* Where to look, as indices in samples [count]:
 * [0, lead) holds none of the new sound, the onset lies in [lead, until), and
 * samples up to count may be used to see that it lasts. lane_hz, lane_width_hz:
 * the band that stood out, for sounds that drown in each single sample. work [2
 * x count] */
struct onset_search {
    const float *samples;
    size_t count, lead, until;
    double rate_hz, lane_hz, lane_width_hz;
    double *work;
};

/* Gives the index of the onset in samples, lead <= index < until (lead - 1 ms
 * at the earliest). What was there before (noise of any colour, hum, an earlier
 * ring) is predicted from its own past and taken out; the onset is the
 * likeliest change of variance in what is left, moved ahead to where it first
 * stands out. Where that shows nothing, the likeliest start of a steady tone in
 * that band. Pure. */
size_t onset_find(const struct onset_search *search);

#endif
