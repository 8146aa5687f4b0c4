#include "cli/preview.h"

RfPreview *rf_preview_new(void)
{
    RfPreview *preview = g_new0(RfPreview, 1);
    preview->frames = g_array_new(FALSE, FALSE, sizeof(RfPreviewFrame));
    preview->moments = g_array_new(FALSE, FALSE, sizeof(RfMoment));
    return preview;
}

void rf_preview_free(RfPreview *preview)
{
    if (!preview) return;
    g_bytes_unref(preview->film);
    g_array_unref(preview->frames);
    g_array_unref(preview->moments);
    g_free(preview);
}
