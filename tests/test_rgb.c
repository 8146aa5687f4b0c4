#include "tracker/rgb.h"

#include <glib.h>
#include <math.h>

static uint16_t luma_of(uint16_t red, uint16_t green, uint16_t blue)
{
    uint16_t luma = 0;
    rf_rgb_to_luma(&red, &green, &blue, 1, &luma);
    return luma;
}

static void test_grey_stays(void)
{
    for (unsigned level = 0; level < 65536; level++) {
        uint16_t grey = (uint16_t)level;
        g_assert_cmpuint(luma_of(grey, grey, grey), ==, level);
    }
}

/* ITU-R BT.601-7, 2.5.1: 0.299 R + 0.587 G + 0.114 B. */
static void test_weights(void)
{
    g_assert_cmpuint(luma_of(65535, 0, 0), ==, 19595); /* 0.299 * 65535 = 19594.97 */
    g_assert_cmpuint(luma_of(0, 65535, 0), ==, 38469); /* 38469.05 */
    g_assert_cmpuint(luma_of(0, 0, 65535), ==, 7471);  /* 7470.99 */
    g_autoptr(GRand) dice = g_rand_new_with_seed(7);
    for (int n = 0; n < 10000; n++) {
        uint16_t red = (uint16_t)g_rand_int(dice), green = (uint16_t)g_rand_int(dice),
                 blue = (uint16_t)g_rand_int(dice);
        double exact = 0.299 * red + 0.587 * green + 0.114 * blue;
        g_assert_cmpfloat(fabs(luma_of(red, green, blue) - exact), <, 1.0);
    }
}

static void test_in_place(void)
{
    uint16_t red[] = {200, 0, 9}, green[] = {0, 200, 9}, blue[] = {0, 0, 9};
    rf_rgb_to_luma(red, green, blue, 3, blue);
    g_assert_cmpuint(blue[0], ==, 60);
    g_assert_cmpuint(blue[1], ==, 117);
    g_assert_cmpuint(blue[2], ==, 9);
}

typedef struct {
    uint8_t luma[4], blue[1], red[1];
} Tile;

static Tile tile_of(uint8_t red, uint8_t green, uint8_t blue, bool is_full_range)
{
    uint8_t rgb[12];
    for (int i = 0; i < 12; i += 3) rgb[i] = red, rgb[i + 1] = green, rgb[i + 2] = blue;
    Tile tile;
    uint8_t *const planes[] = {tile.luma, tile.blue, tile.red};
    rf_rgb_to_yuv420(rgb, 6, 2, 2, is_full_range, planes, (const int[]){2, 1, 1});
    return tile;
}

/* Levels of the 100 % bars, ITU-R BT.601-7 table 3 and its full-range counterpart in JFIF (ITU-T T.871). */
static void test_yuv(void)
{
    Tile white = tile_of(255, 255, 255, false), red = tile_of(255, 0, 0, false),
         blue = tile_of(0, 0, 255, true);
    g_assert_cmpuint(white.luma[3], ==, 235);
    g_assert_cmpuint(white.blue[0], ==, 128);
    g_assert_cmpuint(white.red[0], ==, 128);
    g_assert_cmpuint(red.luma[0], ==, 81);
    g_assert_cmpuint(red.blue[0], ==, 90);
    g_assert_cmpuint(red.red[0], ==, 240);
    g_assert_cmpuint(blue.luma[0], ==, 29);
    g_assert_cmpuint(blue.blue[0], ==, 255);
    g_assert_cmpuint(blue.red[0], ==, 107);
    Tile black = tile_of(0, 0, 0, false);
    g_assert_cmpuint(black.luma[0], ==, 16);
}

int main(int argc, char **argv)
{
    g_test_init(&argc, &argv, NULL);
    g_test_add_func("/rgb/luma/grey-stays", test_grey_stays);
    g_test_add_func("/rgb/luma/weights", test_weights);
    g_test_add_func("/rgb/luma/in-place", test_in_place);
    g_test_add_func("/rgb/yuv/known-levels", test_yuv);
    return g_test_run();
}
