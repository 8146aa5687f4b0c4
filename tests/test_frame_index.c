#include "tracker/frame_index.h"

#define TICK_S 0.001

static RfPacketNote entry_at(int64_t pts)
{
    return (RfPacketNote){.pts = pts, .has_pts = true, .is_entry = true};
}

static RfPacketNote frame_at(int64_t pts)
{
    return (RfPacketNote){.pts = pts, .has_pts = true};
}

static const RfFrameEntry *entry_of(const RfFrameIndex *index, int number)
{
    return &g_array_index(index->entries, RfFrameEntry, number);
}

static void test_empty(void)
{
    g_autoptr(RfFrameIndex) index = rf_frame_index_new(NULL, 0, TICK_S, false);
    g_assert_cmpuint(index->frames, ==, 0);
    g_assert_nonnull(index->obstacle);
    g_assert_cmpint(rf_frame_index_find(index, 0, 0), ==, -1);
}

/* I P B B, twice: closed groups. */
static void test_reordered(void)
{
    RfPacketNote packets[] = {entry_at(100), frame_at(220), frame_at(140), frame_at(180),
                              entry_at(260), frame_at(380), frame_at(300), frame_at(340)};
    g_autoptr(RfFrameIndex) index = rf_frame_index_new(packets, G_N_ELEMENTS(packets), TICK_S, false);
    g_assert_null(index->obstacle);
    g_assert_cmpuint(index->frames, ==, 8);
    for (int n = 0; n < 8; n++) g_assert_cmpint(index->pts[n], ==, 100 + 40 * n);
    g_assert_cmpint(index->reorder, ==, 1);
    g_assert_cmpuint(index->entries->len, ==, 2);
    g_assert_cmpint(entry_of(index, 1)->frame, ==, 4);
    g_assert_cmpint(entry_of(index, 1)->packet, ==, 4);
    g_assert_cmpint(entry_of(index, 1)->settled, ==, 4);
    g_assert_cmpint(rf_frame_index_find(index, 220, 0), ==, 3);
    g_assert_cmpint(rf_frame_index_find(index, 221, 3), ==, -1);
}

/* The second entry is followed by frames shown before it, which need the group before. */
static void test_open_group(void)
{
    RfPacketNote packets[] = {entry_at(100), frame_at(140), entry_at(260),
                              frame_at(180), frame_at(220), frame_at(300)};
    g_autoptr(RfFrameIndex) leading = rf_frame_index_new(packets, G_N_ELEMENTS(packets), TICK_S, true);
    g_assert_null(leading->obstacle);
    g_assert_cmpuint(leading->entries->len, ==, 2);
    g_assert_cmpint(entry_of(leading, 1)->frame, ==, 4);
    g_assert_cmpint(entry_of(leading, 1)->settled, ==, 5);
    g_autoptr(RfFrameIndex) strict = rf_frame_index_new(packets, G_N_ELEMENTS(packets), TICK_S, false);
    g_assert_cmpuint(strict->entries->len, ==, 1);
}

static void test_starts_midway(void)
{
    RfPacketNote packets[] = {frame_at(20), frame_at(60), entry_at(100), frame_at(140)};
    g_autoptr(RfFrameIndex) index = rf_frame_index_new(packets, G_N_ELEMENTS(packets), TICK_S, false);
    g_assert_null(index->obstacle);
    g_assert_cmpuint(index->frames, ==, 2); /* those before the entry can't be decoded */
    g_assert_cmpint(entry_of(index, 0)->packet, ==, 2);
    g_assert_cmpint(entry_of(index, 0)->frame, ==, 0);
}

static void test_hidden(void)
{
    RfPacketNote packets[] = {entry_at(100), frame_at(140), frame_at(180)};
    packets[1].is_hidden = true;
    g_autoptr(RfFrameIndex) index = rf_frame_index_new(packets, G_N_ELEMENTS(packets), TICK_S, false);
    g_assert_null(index->obstacle);
    g_assert_cmpuint(index->frames, ==, 2);
    g_assert_cmpint(rf_frame_index_find(index, 140, 1), ==, -1);
}

static void test_obstacles(void)
{
    RfPacketNote missing[] = {entry_at(100), {.pts = 0}, frame_at(180)};
    g_autoptr(RfFrameIndex) one = rf_frame_index_new(missing, 3, TICK_S, false);
    g_assert_nonnull(one->obstacle);
    g_assert_cmpint(one->missing, ==, 1);
    RfPacketNote twice[] = {entry_at(100), frame_at(140), frame_at(140)};
    g_autoptr(RfFrameIndex) two = rf_frame_index_new(twice, 3, TICK_S, false);
    g_assert_nonnull(two->obstacle);
    RfPacketNote leap[] = {entry_at(INT64_MIN + 1), frame_at(140), frame_at(INT64_MAX)};
    g_autoptr(RfFrameIndex) three = rf_frame_index_new(leap, 3, TICK_S, false);
    g_assert_nonnull(three->obstacle);
    g_assert_cmpint(three->backwards, >, 0);
    RfPacketNote none[] = {frame_at(100), frame_at(140)};
    g_autoptr(RfFrameIndex) four = rf_frame_index_new(none, 2, TICK_S, false);
    g_assert_nonnull(four->obstacle);
}

static void test_goes_back(void)
{
    RfPacketNote packets[120];
    for (int k = 0; k < 120; k++) packets[k] = frame_at(k < 60 ? 10000 + 40 * k : 10020 + 40 * (k - 60));
    packets[0].is_entry = true;
    g_autoptr(RfFrameIndex) index = rf_frame_index_new(packets, 120, TICK_S, false);
    g_assert_cmpstr(index->obstacle, ==, "timestamps go back");
    g_assert_cmpint(index->backwards, ==, 1); /* one run of packets, not sixty */
}

int main(int argc, char **argv)
{
    g_test_init(&argc, &argv, NULL);
    g_test_add_func("/frame-index/empty", test_empty);
    g_test_add_func("/frame-index/reordered", test_reordered);
    g_test_add_func("/frame-index/open-group", test_open_group);
    g_test_add_func("/frame-index/starts-midway", test_starts_midway);
    g_test_add_func("/frame-index/hidden", test_hidden);
    g_test_add_func("/frame-index/obstacles", test_obstacles);
    g_test_add_func("/frame-index/goes-back", test_goes_back);
    return g_test_run();
}
