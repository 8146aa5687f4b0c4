/* Rows of a picture, or pictures of a sample, shared out among threads: for work whose result at one item depends on
 * nothing that another item's work writes, so that the outcome is the same with any number of threads. Not for the frames
 * of a recording: frame_feed.h. */
#pragma once

/* Works on items first .. end - 1; any thread, several at once. */
typedef void (*RfShareJob)(int first, int end, void *user);

/*   threads    0: as many as the machine has cores
 *   at_a_time  >= 1: a thread takes so many items, then the next */
void rf_work_shares_run(int threads, int items, int at_a_time, RfShareJob job, void *user);
