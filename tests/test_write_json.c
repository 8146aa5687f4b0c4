#include "cli/write_json.h"

#include <glib/gstdio.h>
#include <json-glib/json-glib.h>
#include <string.h>

#include "cli/digest.h"
#include "tests/support/sample_results.h"

static JsonObject *parse(JsonParser *parser, const char *text)
{
    g_autoptr(GError) error = NULL;
    json_parser_load_from_data(parser, text, -1, &error);
    g_assert_no_error(error);
    return json_node_get_object(json_parser_get_root(parser));
}

static void scale_round_trip(void)
{
    g_autoptr(RfResults) results = sample_results_new();
    g_autofree char *text = rf_write_json_scale(results);
    g_autoptr(JsonParser) parser = json_parser_new();
    JsonObject *object = parse(parser, text);
    g_assert_cmpfloat(json_object_get_double_member(object, "px_per_mm_x"), ==, 198.41);
    g_assert_cmpfloat(json_object_get_double_member(object, "u_px_per_mm_y"), ==, 0.23);
    g_assert_cmpfloat(json_object_get_double_member(object, "rotation_deg"), ==, 1.204);
    g_assert_cmpint(json_object_get_int_member(object, "lines_found"), ==, 18);
    g_assert_cmpfloat(json_object_get_double_member(object, "residual_px"), ==, 0.061);
}

static void scale_not_found_is_null(void)
{
    g_autoptr(RfResults) results = sample_results_empty_new();
    g_autofree char *text = rf_write_json_scale(results);
    g_autoptr(JsonParser) parser = json_parser_new();
    g_assert_true(json_object_get_null_member(parse(parser, text), "px_per_mm_x"));
}

static void summary_says_what_was_used(void)
{
    g_autoptr(RfResults) results = sample_results_new();
    g_autofree char *text = rf_write_json_summary(results);
    g_autoptr(JsonParser) parser = json_parser_new();
    JsonObject *object = parse(parser, text);
    g_assert_cmpfloat(json_object_get_double_member(object, "unit_charge_C"), ==, 1.6049e-19);
    g_assert_true(json_object_get_boolean_member(object, "unit_resolved"));
    g_assert_cmpint(json_object_get_int_member(object, "droplets_accepted"), ==, 6);
    g_assert_cmpint(json_object_get_int_member(object, "droplets_set_aside"), ==, 1);
    g_assert_cmpint(json_object_get_int_member(object, "spells_accepted"), ==, 7);
    g_assert_nonnull(json_object_get_string_member(object, "program_version"));
    g_assert_cmpuint(json_array_get_length(json_object_get_array_member(object, "inputs")), ==, 2);
    g_assert_cmpuint(json_array_get_length(json_object_get_array_member(object, "settings")), ==, 9);
    g_assert_cmpuint(json_array_get_length(json_object_get_array_member(object, "warnings")), ==, 1);
    JsonObject *video = json_array_get_object_element(json_object_get_array_member(object, "inputs"), 1);
    g_assert_cmpstr(json_object_get_string_member(video, "path"), ==, "cell & view.mkv");
    g_assert_cmpuint(strlen(json_object_get_string_member(video, "sha256")), ==, 64);
    JsonObject *health = json_object_get_object_member(object, "health"),
               *findings = json_object_get_object_member(health, "findings");
    g_assert_cmpstr(json_object_get_string_member(health, "verdict"), ==, "usable with care");
    g_assert_cmpstr(
        json_object_get_string_member(json_object_get_object_member(findings, "exposure"), "verdict"), ==,
        "usable with care");
}

static void summary_unresolved_is_null_with_reason(void)
{
    g_autoptr(RfResults) results = sample_results_empty_new();
    g_autofree char *text = rf_write_json_summary(results);
    g_autoptr(JsonParser) parser = json_parser_new();
    JsonObject *object = parse(parser, text);
    g_assert_true(json_object_get_null_member(object, "unit_charge_C"));
    g_assert_true(json_object_get_null_member(object, "u_unit_charge_C"));
    g_assert_false(json_object_get_boolean_member(object, "unit_resolved"));
    g_assert_cmpstr(json_object_get_string_member(object, "unit_reason"), ==, "no charges");
}

static void odd_bytes_stay_valid(void)
{
    g_autoptr(RfResults) results = sample_results_empty_new();
    results->sheet_path = g_strdup("na\xefve \"sheet\"\n");
    g_autofree char *text = rf_write_json_summary(results);
    g_assert_true(g_utf8_validate(text, -1, NULL));
    g_autoptr(JsonParser) parser = json_parser_new();
    parse(parser, text);
}

/* What people read is what was meant, and what machines read is the same number to the last bit. */
static void numbers_are_short_and_exact(void)
{
    g_autoptr(RfResults) results = sample_results_new();
    results->scale.residual_px = 0.1 + 0.2;
    g_autofree char *text = rf_write_json_scale(results);
    g_assert_nonnull(strstr(text, "\"u_px_per_mm_x\" : 0.21,"));
    g_autoptr(JsonParser) parser = json_parser_new();
    g_assert_cmpfloat(json_object_get_double_member(parse(parser, text), "residual_px"), ==, 0.1 + 0.2);
    g_free(results->sheet_path);
    results->sheet_path = g_strdup("0.20999999999999999 \\\" 0.20999999999999999");
    g_autofree char *summary = rf_write_json_summary(results);
    g_assert_nonnull(strstr(summary, "\"0.20999999999999999 \\\\\\\" 0.20999999999999999\""));
}

static void same_results_same_bytes(void)
{
    g_autoptr(RfResults) one = sample_results_new(), other = sample_results_new();
    g_autofree char *first = rf_write_json_summary(one), *second = rf_write_json_summary(other);
    g_assert_cmpstr(first, ==, second);
}

/* FIPS 180-2, B.1: SHA-256 of "abc". */
static void digest_published(void)
{
    g_autofree char *path = g_build_filename(g_get_tmp_dir(), "risefall-digest-XXXXXX", NULL);
    const int fd = g_mkstemp(path);
    g_assert_cmpint(fd, >=, 0);
    g_assert_true(g_file_set_contents(path, "abc", 3, NULL));
    g_autoptr(GError) error = NULL;
    g_autofree char *sum = rf_digest_file(path, &error);
    g_assert_no_error(error);
    g_assert_cmpstr(sum, ==, "ba7816bf8f01cfea414140de5dae2223b00361a396177a9cb410ff61f20015ad");
    g_remove(path);
    g_close(fd, NULL);
}

static void digest_refuses(void)
{
    g_autoptr(GError) error = NULL;
    g_assert_null(rf_digest_file("/no/such/file", &error));
    g_assert_error(error, G_FILE_ERROR, G_FILE_ERROR_NOENT);
    g_clear_error(&error);
    g_assert_null(rf_digest_file("/", &error));
    g_assert_nonnull(error);
}

int main(int argc, char **argv)
{
    g_test_init(&argc, &argv, NULL);
    g_test_add_func("/write_json/scale/round-trip", scale_round_trip);
    g_test_add_func("/write_json/scale/not-found-is-null", scale_not_found_is_null);
    g_test_add_func("/write_json/summary/says-what-was-used", summary_says_what_was_used);
    g_test_add_func("/write_json/summary/unresolved-is-null-with-reason",
                    summary_unresolved_is_null_with_reason);
    g_test_add_func("/write_json/summary/odd-bytes-stay-valid", odd_bytes_stay_valid);
    g_test_add_func("/write_json/summary/same-results-same-bytes", same_results_same_bytes);
    g_test_add_func("/write_json/numbers/short-and-exact", numbers_are_short_and_exact);
    g_test_add_func("/write_json/digest/published", digest_published);
    g_test_add_func("/write_json/digest/refuses", digest_refuses);
    return g_test_run();
}
