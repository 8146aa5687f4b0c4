/* Rows of a picture shared out among the machine's cores, for work whose result at a row depends on nothing that another
 * row's work writes: the outcome is the same with any number of threads. Not for frames of a recording. */
#pragma once

/* Works on rows first .. end - 1; any thread, several at once. */
typedef void (*RfRowJob)(int first, int end, void *user);

void rf_row_threads_run(int rows, RfRowJob job, void *user);
