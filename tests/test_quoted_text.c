#include "calib/quoted_text.h"

#include <glib.h>

static void check(const char *seen, const char *shown)
{
    g_autofree char *text = rf_quoted_text(seen);
    g_assert_cmpstr(text, ==, shown);
}

static void whole_characters(void)
{
    check("", "");
    check("6.000(10) \xc2\xb5m", "6.000(10) \xc2\xb5m");
    check("5 \xb5m", "5 \xef\xbf\xbdm"); /* Latin-1 */
}

static void nothing_that_a_terminal_obeys(void)
{
    check("a\033[2Jb\r\nc\x7f", "a?[2Jb??c?");
    check("\xc2\x9b"
          "2J",
          "?2J"); /* the same escape as one character, U+009B */
}

static void not_more_than_helps(void)
{
    g_autofree char *sixty = g_strnfill(60, 'x'), *many = g_strnfill(100000, 'x');
    g_autofree char *cut = g_strconcat(sixty, "...", NULL);
    check(sixty, sixty);
    check(many, cut);
}

int main(int argc, char **argv)
{
    g_test_init(&argc, &argv, NULL);
    g_test_add_func("/quoted_text/whole-characters", whole_characters);
    g_test_add_func("/quoted_text/nothing-that-a-terminal-obeys", nothing_that_a_terminal_obeys);
    g_test_add_func("/quoted_text/not-more-than-helps", not_more_than_helps);
    return g_test_run();
}
