/* Work on many things, perhaps side by side: how is the caller's affair, who knows the threads. */
#pragma once

#include <stddef.h>

/* Calls work(context, i) for each i below n, in any order, perhaps from several threads; returns when all are done. */
typedef void (*RfForEach)(void *user, size_t n, void (*work)(void *context, size_t i), void *context);

typedef struct {
    RfForEach for_each; /* or NULL: one after another */
    void *user;
} RfSideBySide;

static inline void rf_for_each(const RfSideBySide *how, size_t n, void (*work)(void *context, size_t i),
                               void *context)
{
    if (how && how->for_each)
        how->for_each(how->user, n, work, context);
    else
        for (size_t i = 0; i < n; i++) work(context, i);
}
