#include "tracker/libav.h"

#include <string.h>

#define LONGEST_WORDS 200

GQuark rf_video_error_quark(void)
{
    return g_quark_from_static_string("rf-video-error");
}

/* libav's log callback gets no pointer of ours, so its last line waits in storage of the thread that called it. */
static char *last_words(void)
{
    static _Thread_local char line[LONGEST_WORDS];
    return line;
}

/* "[concat @ 0x55d0c0ffee00] Format not on whitelist 'matroska,...'" becomes "concat: Format not on whitelist": the same
 * words in every run, and no lists. */
static void remember(char *line)
{
    char *at = *line == '[' ? strstr(line, " @ 0x") : NULL, *end = at != NULL ? strchr(at, ']') : NULL;
    char *list = strstr(line, "whitelist '");
    if (list != NULL) list[strlen("whitelist")] = '\0';
    if (end != NULL) *at = '\0';
    g_snprintf(last_words(), LONGEST_WORDS, "%s%s%s", end != NULL ? line + 1 : line, end != NULL ? ":" : "",
               end != NULL ? end + 1 : "");
}

/* Decoders of ours carry a counter in `opaque` (copied to libav's own threads): some of them report damage nowhere
 * but in the log. */
static void listen(void *context, int level, const char *format, va_list arguments)
{
    if (level > AV_LOG_ERROR) return;
    int with_prefix = 1;
    char line[LONGEST_WORDS];
    av_log_format_line2(context, level, format, arguments, line, sizeof line, &with_prefix);
    g_strstrip(line);
    if (*line != '\0') remember(line);
    const AVClass *class = context != NULL ? *(AVClass **)context : NULL;
    if (class == NULL || class != avcodec_get_class()) return;
    int *complaints = ((AVCodecContext *)context)->opaque;
    if (complaints != NULL) g_atomic_int_inc(complaints);
}

void rf_libav_listen(void)
{
    static gsize is_listening = 0;
    if (g_once_init_enter(&is_listening)) {
        av_log_set_callback(listen);
        g_once_init_leave(&is_listening, 1);
    }
    *last_words() = '\0';
}

/* "clip.mkv: TEXT: Invalid data found when processing input (mov: moov atom not found)" */
bool rf_libav_fail(GError **error, RfVideoError code, const char *path, int status, const char *text)
{
    GString *message = g_string_new(NULL);
    g_string_printf(message, "%s: %s", path, text);
    char words[AV_ERROR_MAX_STRING_SIZE];
    if (status < 0 && av_strerror(status, words, sizeof words) == 0)
        g_string_append_printf(message, ": %s", words);
    if (status < 0 && *last_words() != '\0') g_string_append_printf(message, " (%s)", last_words());
    g_set_error_literal(error, RF_VIDEO_ERROR, (int)code, message->str);
    g_string_free(message, TRUE);
    return false;
}

bool rf_libav_check_file(const char *path, GError **error)
{
    if (!g_file_test(path, G_FILE_TEST_EXISTS)) {
        return rf_libav_fail(error, RF_VIDEO_ERROR_ABSENT, path, 0, "no such file");
    }
    if (!g_file_test(path, G_FILE_TEST_IS_REGULAR)) {
        return rf_libav_fail(error, RF_VIDEO_ERROR_ABSENT, path, 0, "not a regular file");
    }
    return true;
}

bool rf_libav_check_size(const char *path, int width, int height, GError **error)
{
    if (width >= 1 && height >= 1 && width <= RF_VIDEO_MAX_SIDE_PX && height <= RF_VIDEO_MAX_SIDE_PX &&
        (int64_t)width * height <= RF_VIDEO_MAX_PIXELS) {
        return true;
    }
    g_set_error(error, RF_VIDEO_ERROR, RF_VIDEO_ERROR_UNSUPPORTED,
                "%s: a picture of %d x %d pixels; need 1 to %d on each side", path, width, height,
                RF_VIDEO_MAX_SIDE_PX);
    return false;
}
