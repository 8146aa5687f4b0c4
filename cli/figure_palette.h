/* The colours of figures and view. Six hues chosen so that neighbours differ in lightness as well as in hue; a mark's
 * shape repeats the difference, since colour alone must never carry it. In the page each becomes a CSS variable with a
 * second value for dark screens. */
#pragma once

enum { RF_FIGURE_HUES = 6, RF_FIGURE_SHAPES = 5 };

/* Hex, without '#', as gnuplot and the style sheet name them. */
#define RF_FIGURE_HUE_HEX                                                                                    \
    {                                                                                                        \
        "0b6e7f", "a15c00", "7d3c98", "4a7419", "b03a2e", "3558a8"                                           \
    }

/* The same hues on dark ground, as numbers. */
#define RF_FIGURE_DARK_HUE_RGB                                                                               \
    {                                                                                                        \
        0x58c2d3, 0xeeb05a, 0xd3a0e6, 0xa4cf72, 0xf29084, 0x9db8fb                                           \
    }
