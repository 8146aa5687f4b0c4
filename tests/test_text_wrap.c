#include "cli/text_wrap.h"

#include <unistd.h>

static void check(const char *text, int indent, int columns, bool is_begun, const char *expected)
{
    g_autoptr(GString) out = g_string_new(NULL);
    rf_text_wrap_append(out, text, indent, columns, is_begun);
    g_assert_cmpstr(out->str, ==, expected);
}

static void breaks_between_words(void)
{
    check("one two three", 0, 8, false, "one two\nthree\n");
    check("one two three", 0, 13, false, "one two three\n");
    check("  one\n two  ", 2, 20, false, "  one two\n");
    check("one two three", 2, 9, false, "  one two\n  three\n");
}

static void goes_on_where_a_line_is_begun(void)
{
    check("one two three", 2, 9, true, "one two\n  three\n");
}

static void long_words_stay_whole(void)
{
    check("a abcdefghij b", 0, 5, false, "a\nabcdefghij\nb\n");
}

static void counts_characters(void)
{
    check("\xc2\xb5\xc2\xb5 \xc2\xb5", 0, 4, false, "\xc2\xb5\xc2\xb5 \xc2\xb5\n");
    g_assert_cmpint(rf_text_wrap_width("\xc2\xb5m"), ==, 2);
    g_assert_cmpint(rf_text_wrap_width("\xff"), ==, 1);
}

static void no_terminal_has_80_columns(void)
{
    int ends[2];
    g_assert_cmpint(pipe(ends), ==, 0);
    g_assert_cmpint(rf_text_wrap_terminal_columns(ends[1]), ==, 80);
    close(ends[0]);
    close(ends[1]);
}

int main(int argc, char **argv)
{
    g_test_init(&argc, &argv, NULL);
    g_test_add_func("/text_wrap/append/breaks-between-words", breaks_between_words);
    g_test_add_func("/text_wrap/append/goes-on-where-a-line-is-begun", goes_on_where_a_line_is_begun);
    g_test_add_func("/text_wrap/append/long-words-stay-whole", long_words_stay_whole);
    g_test_add_func("/text_wrap/append/counts-characters", counts_characters);
    g_test_add_func("/text_wrap/terminal/80-without-one", no_terminal_has_80_columns);
    return g_test_run();
}
