#include "tracker/row_threads.h"

#include <glib.h>

enum { ROWS_AT_A_TIME = 16, MOST_THREADS = 16 };

typedef struct {
    int rows;
    int next; /* atomic */
    RfRowJob job;
    void *user;
} Rows;

static void *work(void *data)
{
    Rows *rows = data;
    int first;
    while ((first = g_atomic_int_add(&rows->next, ROWS_AT_A_TIME)) < rows->rows)
        rows->job(first, MIN(first + ROWS_AT_A_TIME, rows->rows), rows->user);
    return NULL;
}

void rf_row_threads_run(int rows, RfRowJob job, void *user)
{
    Rows shared = {rows, 0, job, user};
    GThread *helpers[MOST_THREADS];
    int n = CLAMP((int)g_get_num_processors() - 1, 0, MOST_THREADS);
    n = MIN(n, rows / ROWS_AT_A_TIME);
    for (int i = 0; i < n; i++) helpers[i] = g_thread_new("rf-rows", work, &shared);
    work(&shared);
    for (int i = 0; i < n; i++) g_thread_join(helpers[i]);
}
