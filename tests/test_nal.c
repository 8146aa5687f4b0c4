#include "tracker/nal.h"

#include <glib.h>

/* Global headers as ISO/IEC 14496-15 lays them out, zeros where nothing is read: lengths of four bytes. */
static const uint8_t avc[7] = {1, [4] = 0xff}, hevc[23] = {1, [21] = 0xff};

#define REFRESH(packet, setup, is_hevc) rf_nal_is_refresh(packet, sizeof packet, setup, sizeof setup, is_hevc)

/* Types: ITU-T H.264 table 7-1, the low five bits: 6 SEI, 7 SPS, 1 a slice, 5 an IDR slice. */
static void test_h264(void)
{
    const uint8_t sei_then_idr[] = {0, 0, 0, 2, 0x06, 0x80, 0, 0, 0, 2, 0x65, 0x88};
    const uint8_t sei_then_slice[] = {0, 0, 0, 2, 0x06, 0x80, 0, 0, 0, 2, 0x41, 0x88};
    g_assert_true(REFRESH(sei_then_idr, avc, false));
    g_assert_false(REFRESH(sei_then_slice, avc, false)); /* a recovery point is no refresh */
    const uint8_t start_codes[] = {0, 0, 0, 1, 0x67, 0x42, 0, 0, 1, 0x65, 0x88, 0x84};
    g_assert_true(rf_nal_is_refresh(start_codes, sizeof start_codes, NULL, 0, false));
}

/* Types: ITU-T H.265 table 7-1, bits 1 to 6: 1 a trailing slice, 19 IDR, 21 CRA, 32 and above no slices. */
static void test_hevc(void)
{
    const uint8_t idr[] = {0, 0, 0, 3, 0x40, 0x01, 0x0c, 0, 0, 0, 3, 0x26, 0x01, 0xaf};
    const uint8_t cra[] = {0, 0, 0, 3, 0x2a, 0x01, 0xaf};
    const uint8_t trailing[] = {0, 0, 0, 3, 0x02, 0x01, 0xd0};
    g_assert_true(REFRESH(idr, hevc, true));
    g_assert_true(REFRESH(cra, hevc, true));
    g_assert_false(REFRESH(trailing, hevc, true));
}

static void test_refuses(void)
{
    const uint8_t lies[] = {0, 0, 0xff, 0xff, 0x65, 0x88},
                  empty_unit[] = {0, 0, 0, 0, 0, 0, 0, 2, 0x65, 0x88};
    const uint8_t cut[] = {0, 0, 0}, no_unit[] = {0x65, 0x88, 0x84, 0, 0, 1};
    g_assert_false(REFRESH(lies, avc, false));
    g_assert_false(REFRESH(empty_unit, avc, false));
    g_assert_false(REFRESH(cut, avc, false));
    g_assert_false(rf_nal_is_refresh(no_unit, sizeof no_unit, NULL, 0, false));
    g_assert_false(rf_nal_is_refresh(NULL, 0, avc, sizeof avc, false));
    g_assert_false(
        rf_nal_is_refresh(lies, sizeof lies, avc, 3, false)); /* a header cut short: start codes, then */
}

/* Any bytes at all, in a buffer of just that size: for the sanitizers. */
static void test_any_bytes(void)
{
    g_autoptr(GRand) dice = g_rand_new_with_seed(20261);
    int refreshes = 0;
    for (int n = 0; n < 20000; n++) {
        size_t size = (size_t)g_rand_int_range(dice, 1, 24);
        g_autofree uint8_t *bytes = g_malloc(size);
        for (size_t i = 0; i < size; i++)
            bytes[i] = (uint8_t)(g_rand_int_range(dice, 0, 4) ? i % 3 : g_rand_int(dice));
        refreshes += rf_nal_is_refresh(bytes, size, n % 3 ? (n % 3 > 1 ? hevc : avc) : NULL,
                                       n % 3 ? (n % 3 > 1 ? sizeof hevc : sizeof avc) : 0, n % 2);
    }
    g_assert_cmpint(refreshes, >, 0);
    g_assert_cmpint(refreshes, <, 20000);
}

int main(int argc, char **argv)
{
    g_test_init(&argc, &argv, NULL);
    g_test_add_func("/nal/h264", test_h264);
    g_test_add_func("/nal/hevc", test_hevc);
    g_test_add_func("/nal/refuses", test_refuses);
    g_test_add_func("/nal/any-bytes", test_any_bytes);
    return g_test_run();
}
