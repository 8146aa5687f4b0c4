#include "tracker/reticle_shade.h"

#include "tracker/interpolate.h"

#include <math.h>
#include <stdlib.h>

/* The unshaded background varies slowly: its value in a tile is what only the brightest third of the pixels exceed,
 * however many lines cross the tile. */
enum { TILE_PX = 16 };
static const double LEAST_SHADE = 0.05; /* less than this is not worth a mark */

typedef struct {
    int across, down;
    float *level;
} Tiles;

static int by_value(const void *a, const void *b)
{
    float p = *(const float *)a, q = *(const float *)b;
    return p < q ? -1 : p > q;
}

static float tile_level(const RfBackground *background, int column, int row)
{
    float values[TILE_PX * TILE_PX];
    int n = 0;
    for (int y = row * TILE_PX; y < MIN((row + 1) * TILE_PX, background->height); y++)
        for (int x = column * TILE_PX; x < MIN((column + 1) * TILE_PX, background->width); x++)
            values[n++] = background->level[(size_t)y * (size_t)background->width + (size_t)x];
    qsort(values, (size_t)n, sizeof *values, by_value);
    return values[n * 2 / 3];
}

/* Median of each tile's neighbourhood of 3 x 3: a tile full of numeral, or of a bright speck, doesn't count. */
static void smooth(Tiles *tiles)
{
    g_autofree float *out = g_new(float, (size_t)tiles->across *(size_t)tiles->down);
    for (int row = 0; row < tiles->down; row++)
        for (int column = 0; column < tiles->across; column++) {
            float near[9];
            int n = 0;
            for (int y = MAX(row - 1, 0); y <= MIN(row + 1, tiles->down - 1); y++)
                for (int x = MAX(column - 1, 0); x <= MIN(column + 1, tiles->across - 1); x++)
                    near[n++] = tiles->level[y * tiles->across + x];
            qsort(near, (size_t)n, sizeof *near, by_value);
            out[row * tiles->across + column] = near[n / 2];
        }
    g_free(tiles->level);
    tiles->level = g_steal_pointer(&out);
}

static Tiles unshaded(const RfBackground *background)
{
    Tiles tiles = {.across = (background->width + TILE_PX - 1) / TILE_PX,
                   .down = (background->height + TILE_PX - 1) / TILE_PX};
    tiles.level = g_new(float, (size_t)tiles.across *(size_t)tiles.down);
    for (int row = 0; row < tiles.down; row++)
        for (int column = 0; column < tiles.across; column++)
            tiles.level[row * tiles.across + column] = tile_level(background, column, row);
    smooth(&tiles);
    return tiles;
}

void rf_reticle_shade_find(RfBackground *background)
{
    Tiles tiles = unshaded(background);
    double black = background->noise.black_level;
    for (int y = 0; y < background->height; y++)
        for (int x = 0; x < background->width; x++) {
            size_t i = (size_t)y * (size_t)background->width + (size_t)x;
            float at_x = ((float)x + 0.5f) / TILE_PX - 0.5f, at_y = ((float)y + 0.5f) / TILE_PX - 0.5f;
            double open = (double)rf_interpolate_linear(tiles.level, tiles.across, tiles.down, at_x, at_y);
            double sd = sqrt(rf_pixel_noise_var(&background->noise, open));
            double share = open > black ? ((double)background->level[i] - black) / (open - black) : 1;
            bool is_shaded = 1 - share > LEAST_SHADE && open - (double)background->level[i] > 0.7 * sd;
            background->transmission[i] = is_shaded ? (float)CLAMP(share, 0.02, 1.0) : 1;
            background->flags[i] = is_shaded ? RF_PIXEL_LINE : 0;
        }
    g_free(tiles.level);
}
