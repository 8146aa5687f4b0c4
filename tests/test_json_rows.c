#include "cli/json_rows.h"

static void check(const char *csv, const char *expected)
{
    g_autoptr(GString) out = g_string_new(NULL);
    rf_json_rows_append(out, csv, 2);
    g_assert_cmpstr(out->str, ==, expected);
}

static void numbers_keep_their_digits(void)
{
    check("droplet,charge_C\n1,1.6020e-19\n2,-0.50\n",
          "[\n  {\"droplet\": 1, \"charge_C\": 1.6020e-19},\n  {\"droplet\": 2, \"charge_C\": -0.50}]");
}

static void empty_is_null(void)
{
    check("a,b,c\n,\"\",x\n", "[\n  {\"a\": null, \"b\": \"\", \"c\": \"x\"}]");
    check("a,b\n", "[]");
}

/* JSON (RFC 8259, 6) has no such numbers. */
static void what_only_looks_like_a_number_is_text(void)
{
    check("a,b,c,d\n007,.5,5.,1e\n", "[\n  {\"a\": \"007\", \"b\": \".5\", \"c\": \"5.\", \"d\": \"1e\"}]");
    check("a,b\n\"7\",inf\n", "[\n  {\"a\": \"7\", \"b\": \"inf\"}]");
}

static void text_is_quoted(void)
{
    check("label,n\n\"a, \"\"b\"\"\nc\\\",1\n", "[\n  {\"label\": \"a, \\\"b\\\"\\u000ac\\\\\", \"n\": 1}]");
}

int main(int argc, char **argv)
{
    g_test_init(&argc, &argv, NULL);
    g_test_add_func("/json_rows/append/numbers-keep-their-digits", numbers_keep_their_digits);
    g_test_add_func("/json_rows/append/empty-is-null", empty_is_null);
    g_test_add_func("/json_rows/append/looks-like-a-number", what_only_looks_like_a_number_is_text);
    g_test_add_func("/json_rows/append/text-is-quoted", text_is_quoted);
    return g_test_run();
}
