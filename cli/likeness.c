#include "cli/likeness.h"

#include <glib.h>
#include <stdbool.h>
#include <string.h>

enum { LONGEST = 40 };

static int steps_between(const char *a, const char *b)
{
    const size_t n = strlen(a), m = strlen(b);
    int steps[LONGEST + 1][LONGEST + 1];
    if (n > LONGEST || m > LONGEST) return LONGEST;
    for (size_t i = 0; i <= n; i++) {
        for (size_t j = 0; j <= m; j++) {
            if (i == 0 || j == 0) {
                steps[i][j] = (int)(i + j);
                continue;
            }
            const int changed = steps[i - 1][j - 1] + (a[i - 1] != b[j - 1]);
            steps[i][j] = MIN(changed, MIN(steps[i - 1][j], steps[i][j - 1]) + 1);
            if (i > 1 && j > 1 && a[i - 1] == b[j - 2] && a[i - 2] == b[j - 1])
                steps[i][j] = MIN(steps[i][j], steps[i - 2][j - 2] + 1);
        }
    }
    return steps[n][m];
}

static bool is_begun_alike(const char *one, const char *other)
{
    const size_t shorter = MIN(strlen(one), strlen(other));
    return shorter >= 3 && strncmp(one, other, shorter) == 0;
}

const char *rf_likeness_nearest(const char *word, const char *const *known, size_t n_known)
{
    const char *nearest = NULL;
    int fewest = LONGEST;
    for (size_t i = 0; i < n_known; i++) {
        const int steps = steps_between(word, known[i]);
        if (steps >= fewest || 3 * steps > (int)strlen(known[i])) continue;
        fewest = steps;
        nearest = known[i];
    }
    for (size_t i = 0; i < n_known && !nearest; i++)
        if (is_begun_alike(word, known[i])) nearest = known[i];
    return nearest;
}
