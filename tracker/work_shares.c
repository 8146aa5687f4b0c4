#include "tracker/work_shares.h"

#include <glib.h>

enum { MOST_THREADS = 64 };

typedef struct {
    int items, at_a_time;
    int next; /* atomic */
    RfShareJob job;
    void *user;
} Shares;

static void *work(void *data)
{
    Shares *shares = data;
    int first;
    while ((first = g_atomic_int_add(&shares->next, shares->at_a_time)) < shares->items)
        shares->job(first, MIN(first + shares->at_a_time, shares->items), shares->user);
    return NULL;
}

void rf_work_shares_run(int threads, int items, int at_a_time, RfShareJob job, void *user)
{
    Shares shares = {items, at_a_time, 0, job, user};
    GThread *helpers[MOST_THREADS];
    int wanted = threads > 0 ? threads : (int)g_get_num_processors();
    int n = CLAMP(MIN(wanted, (items + at_a_time - 1) / at_a_time) - 1, 0, MOST_THREADS);
    for (int i = 0; i < n; i++) helpers[i] = g_thread_new("rf-shares", work, &shares);
    work(&shares);
    for (int i = 0; i < n; i++) g_thread_join(helpers[i]);
}
