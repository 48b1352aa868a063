/* Does an input begin with a blow? Recordings are often trimmed at the onset:
 * there is nothing before it to rise over. Then it shows by falling: at once in
 * some bins, or slowly and steadily in a line of the spectrum. Noise that
 * begins does neither. */
#ifndef WANE_DETECT_START_H
#define WANE_DETECT_START_H

#include "detect/bank.h"

#define START_QUICK_FRAMES  54 /* after bank->first, for the first test */
#define START_STEADY_FRAMES 26 /* for the second */

/* Some bin of the first frames stands as far over those that follow as a strike
 * over its floor. Frames up to `last` are used. */
bool start_falls_at_once(const struct bank *bank, int64_t last);

/* A line that decays from the first frame to `last`, without a break. */
bool start_falls_slowly(const struct bank *bank, int64_t last);

#endif
