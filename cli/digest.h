/* SHA-256 of an input file, so that a report names exactly what it was made from. Reads in pieces: a recording of
 * any length takes the same memory. */
#pragma once

#include <glib.h>

/* Lower-case hexadecimal, 64 characters (returns new); NULL with the error where the file can't be read. */
char *rf_digest_file(const char *path, GError **error);
