/* A gnuplot picture made ready to stand inside a page: without header, its ids made unique, its colours turned into
 * the page's variables, its droplets marked so that the page can find them. Not for pictures from elsewhere. */
#pragma once

#include <glib.h>

/* `svg` as gnuplot's svg terminal writes it; `name` becomes the prefix of its ids; `label` is what a screen reader
 * says, unescaped. (returns new) */
char *rf_inline_svg_new(const char *svg, const char *name, const char *label);
