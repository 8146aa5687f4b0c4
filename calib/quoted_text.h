/* What stood in somebody's file, fit to be repeated in a message: whole characters, none that a terminal would obey, and not
 * more of it than helps. Not for text that is kept. Pure; safe from any thread. */
#pragma once

/* Valid UTF-8 without control characters (each becomes `?`), cut to 60 characters with `...` behind. (returns new) */
char *rf_quoted_text(const char *seen);
