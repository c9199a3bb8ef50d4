/* The plain way, for comparison: two pointers over separate channels, all pairs by lag. */
#include <stdint.h>

void sweep(const int64_t *start, int64_t starts, const int64_t *stop, int64_t stops,
           int64_t bin, int64_t bins_each_side, int64_t *counts)
{
    int64_t reach = (2 * bins_each_side + 1) * bin, low = 0;
    for (int64_t i = 0; i < starts; i++) {
        while (low < stops && 2 * (stop[low] - start[i]) < -reach)
            low++;
        for (int64_t j = low; j < stops; j++) {
            int64_t lag = 2 * (stop[j] - start[i]);
            if (lag >= reach)
                break;
            counts[(lag + reach) / (2 * bin)]++;
        }
    }
}
