#include "physics/field_timeline.h"

RfFieldTimeline *rf_field_timeline_new(void)
{
    RfFieldTimeline *timeline = g_new0(RfFieldTimeline, 1);
    timeline->intervals = g_array_new(FALSE, TRUE, sizeof(RfFieldInterval));
    timeline->switches = g_array_new(FALSE, TRUE, sizeof(RfFieldSwitch));
    timeline->findings = g_array_new(FALSE, TRUE, sizeof(RfLogFinding));
    return timeline;
}

void rf_field_timeline_free(RfFieldTimeline *timeline)
{
    if (!timeline) return;
    g_array_unref(timeline->intervals);
    g_array_unref(timeline->switches);
    g_array_unref(timeline->findings);
    g_free(timeline);
}

const RfFieldInterval *rf_field_timeline_at(const RfFieldTimeline *timeline, double time_s)
{
    unsigned last = timeline->intervals->len - 1;
    const RfFieldInterval *interval = (const RfFieldInterval *)(const void *)timeline->intervals->data;
    for (unsigned k = 0; k < last; k++, interval++)
        if (time_s < interval->end_s) break;
    return interval;
}

double rf_field_timeline_impulse_v_s(const RfFieldTimeline *timeline, double time_s)
{
    const RfFieldInterval *interval = (const RfFieldInterval *)(const void *)timeline->intervals->data;
    unsigned n = timeline->intervals->len;
    double sum = 0;
    for (unsigned k = 0; k < n; k++, interval++) {
        if (k + 1 == n || time_s < interval->end_s)
            return sum + interval->voltage_v * (time_s - interval->start_s);
        sum += interval->voltage_v * (interval->end_s - interval->start_s);
    }
    return sum;
}
