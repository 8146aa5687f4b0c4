/* What a person with a stopwatch, and a voltmeter that logs, would have written down of a synthetic recording. Entries
 * carry the person's bias and spread and, where the scene asks for them, mistakes of each kind that an audit names.
 * Not for auditing. */
#pragma once

#include "cli/simulate_record.h"

typedef struct {
    char *timings; /* entry,label,motion,divisions,time_s,voltage_V,start_s */
    char *truth;   /* entry,droplet,true_time_s,finding,true_divisions,note */
} RfHandRecord;

/* Fewer entries than asked for come out where the recording doesn't hold that many whole crossings. Free both strings. */
RfHandRecord rf_simulate_hand_write(const RfRecord *record, const RfWorld *world, const RfScene *scene,
                                    const RfView *view);

/* (returns new) time_s,voltage_V on a clock of its own: readings every log_interval_s, uneven by a few per cent. */
char *rf_simulate_hand_log(const RfRecord *record, const RfWorld *world, const RfScene *scene);
