#include "cli/digest.h"

#include <errno.h>
#include <stdio.h>

enum { PIECE_BYTES = 1 << 18 };

char *rf_digest_file(const char *path, GError **error)
{
    FILE *file = fopen(path, "rbe");
    if (!file) {
        g_set_error(error, G_FILE_ERROR, (gint)g_file_error_from_errno(errno), "%s: can't be opened: %s",
                    path, g_strerror(errno));
        return NULL;
    }
    g_autoptr(GChecksum) sum = g_checksum_new(G_CHECKSUM_SHA256);
    g_autofree guchar *piece = g_malloc(PIECE_BYTES);
    size_t got;
    while ((got = fread(piece, 1, PIECE_BYTES, file)) > 0) g_checksum_update(sum, piece, (gssize)got);
    const int failure = ferror(file) ? (errno ? errno : EIO) : 0;
    fclose(file);
    if (failure) {
        g_set_error(error, G_FILE_ERROR, (gint)g_file_error_from_errno(failure), "%s: can't be read: %s",
                    path, g_strerror(failure));
        return NULL;
    }
    return g_strdup(g_checksum_get_string(sum));
}
