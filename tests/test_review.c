#include "cli/review.h"

#include <glib/gstdio.h>
#include <string.h>

#include "calib/table.h"
#include "cli/folder_tree.h"

static const char DIGEST[] = "9f86d081884c7d659a2feaa0c55ad015a3bf4f1b2b0b822cd15d6c15b0f00a08";

#define HEADER                                                                                               \
    "action,droplet,time_s,x_px,y_px,cut_s,other_droplet,other_time_s,other_x_px,other_y_px,reason,name,"    \
    "date,recording_sha256\n"

typedef struct {
    char *folder, *path;
    RfResults *results;
} Desk;

static void set_up(Desk *desk, const void *unused)
{
    (void)unused;
    desk->folder = g_dir_make_tmp("risefall-review-XXXXXX", NULL);
    desk->path = g_build_filename(desk->folder, "review.csv", NULL);
    desk->results = rf_results_new();
    const RfInputFile files[] = {{g_strdup("run sheet"), g_strdup("a.ini"), g_strdup("00")},
                                 {g_strdup("recording"), g_strdup("a.mkv"), g_strdup(DIGEST)}};
    g_array_append_vals(desk->results->inputs, files, 2);
}

static void tear_down(Desk *desk, const void *unused)
{
    (void)unused;
    rf_results_free(desk->results);
    rf_folder_tree_remove(desk->folder);
    g_free(desk->folder);
    g_free(desk->path);
}

static bool read_text(Desk *desk, const char *text, GError **error)
{
    g_assert_true(g_file_set_contents(desk->path, text, -1, NULL));
    return rf_review_read(desk->path, desk->results, error);
}

static const RfReviewRow *read_well(Desk *desk, const char *text, guint rows)
{
    g_autoptr(GError) error = NULL;
    g_assert_true(read_text(desk, text, &error));
    g_assert_no_error(error);
    g_assert_cmpuint(desk->results->review->len, ==, rows);
    return (const RfReviewRow *)(const void *)desk->results->review->data;
}

static void every_action(Desk *desk, const void *unused)
{
    (void)unused;
    const RfReviewRow *row =
        read_well(desk,
                  HEADER "set aside,4,12.5,101.25,220.5,,,,,,dust,A. Example,2026-05-04,\n"
                         "restore,5,1,2,3,,,,,,round,B,,\n"
                         "cut,6,1,2,3,41.033333,,,,,jump,B,,\n"
                         "join,7,1,2,3,,8,4,5,6,same,B,,\n",
                  4);
    g_assert_cmpint(row[0].action, ==, RF_REVIEW_SET_ASIDE);
    g_assert_cmpuint(row[0].line, ==, 2);
    g_assert_cmpuint(row[0].place.droplet, ==, 4);
    g_assert_cmpfloat_with_epsilon(row[0].place.time_s, 12.5, 1e-12);
    g_assert_cmpfloat_with_epsilon(row[0].place.x_px, 101.25, 1e-12);
    g_assert_cmpfloat_with_epsilon(row[0].place.y_px, 220.5, 1e-12);
    g_assert_cmpstr(row[0].date, ==, "2026-05-04");
    g_assert_cmpint(row[1].action, ==, RF_REVIEW_RESTORE);
    g_assert_cmpfloat_with_epsilon(row[2].cut_s, 41.033333, 1e-12);
    g_assert_cmpuint(row[3].other.droplet, ==, 8);
    g_assert_cmpfloat_with_epsilon(row[3].other.y_px, 6, 1e-12);
    g_assert_cmpint(row[3].outcome, ==, RF_REVIEW_NOT_FOUND);
}

/* As the page saves it, opened in a spreadsheet of another country and saved again. */
static void as_spreadsheets_write(Desk *desk, const void *unused)
{
    (void)unused;
    g_autofree char *text =
        g_strconcat("\xef\xbb\xbf"
                    "Name;Reason;Action;Droplet;Time (s);X_px;y_px;Date;recording_sha256;my own\r\n"
                    "\"Ä. Example\";\"a \"\"tail\"\"; see 5,9 s\r\nand later\";SET "
                    "ASIDE;12;5,966667;122,1;166,3;04.05.2026;",
                    DIGEST, ";x\r\n", NULL);
    const RfReviewRow *row = read_well(desk, text, 1);
    g_assert_cmpstr(row->name, ==, "Ä. Example");
    g_assert_cmpstr(row->reason, ==, "a \"tail\"; see 5,9 s\r\nand later");
    g_assert_cmpfloat_with_epsilon(row->place.time_s, 5.966667, 1e-12);
    g_assert_cmpuint(desk->results->warnings->len, ==, 0); /* it says whose it is */
}

static void no_decisions_is_a_review_too(Desk *desk, const void *unused)
{
    (void)unused;
    read_well(desk, HEADER, 0);
}

static void silent_about_its_recording(Desk *desk, const void *unused)
{
    (void)unused;
    read_well(desk,
              "action,droplet,time_s,x_px,y_px,reason,name\nset aside,1,1,1,1,a,b\nrestore,1,1,1,1,a,b\n", 2);
    g_assert_cmpuint(desk->results->warnings->len, ==, 1);
    g_assert_nonnull(strstr(desk->results->warnings->pdata[0], "2 of 2 entries don't say which recording"));
}

static void of_another_recording(Desk *desk, const void *unused)
{
    (void)unused;
    g_autoptr(GError) error = NULL;
    g_assert_false(read_text(desk, HEADER "set aside,1,1,1,1,,,,,,a,b,,00ff\n", &error));
    g_assert_error(error, RF_REVIEW_ERROR, RF_REVIEW_ERROR_OTHER_RECORDING);
    g_assert_nonnull(strstr(error->message, "review.csv: line 2, column recording_sha256: seen `00ff`"));
    g_assert_nonnull(strstr(error->message, DIGEST));
    g_assert_nonnull(strstr(error->message, "empty the cell to use this one all the same"));
}

/* Several files are one recording, in their order. */
static void of_several_files(Desk *desk, const void *unused)
{
    (void)unused;
    const RfInputFile more = {g_strdup("recording"), g_strdup("b.mkv"), g_strdup("beef")};
    g_array_append_val(desk->results->inputs, more);
    g_autofree char *text = g_strconcat(HEADER "set aside,1,1,1,1,,,,,,a,b,,", DIGEST, " beef\n", NULL);
    read_well(desk, text, 1);
    g_assert_cmpuint(desk->results->warnings->len, ==, 0);
}

typedef struct {
    const char *text, *says;
} Mistake;

static void mistakes_are_named(Desk *desk, const void *unused)
{
    (void)unused;
    const Mistake mistakes[] = {
        {"", "review.csv"},
        {"\n", "review.csv"},
        {"droplet,time_s,x_px,y_px,reason,name\n", "action"},
        {"action,droplet,time_s,x_px,y_px,name\n", "reason"},
        {"action,droplet,time_s,x_px,y_px,reason\n", "name"},
        {HEADER "discard,1,1,1,1,,,,,,a,b,,\n",
         "line 2, column action: seen `discard`, needed set aside, restore, cut or join"},
        {HEADER "restore,1,1,1,1,,,,,,a,b,,\n,1,1,1,1,,,,,,a,b,,\n", "line 3, column action"},
        {HEADER "restore,0,1,1,1,,,,,,a,b,,\n",
         "line 2, column droplet: seen `0`, needed a droplet's number, from 1"},
        {HEADER "restore,1.5,1,1,1,,,,,,a,b,,\n", "line 2, column droplet"},
        {HEADER "restore,-1,1,1,1,,,,,,a,b,,\n", "line 2, column droplet"},
        {HEADER "restore,99999999999,1,1,1,,,,,,a,b,,\n", "line 2, column droplet"},
        {HEADER "restore,1,soon,1,1,,,,,,a,b,,\n", "line 2, column time_s: seen `soon`"},
        {HEADER "restore,1,-1,1,1,,,,,,a,b,,\n",
         "line 2, column time_s: seen `-1`, needed seconds since the recording's first frame"},
        {HEADER "restore,1,1,,1,,,,,,a,b,,\n", "line 2, column x_px"},
        {HEADER "restore,1,1,1,1e99,,,,,,a,b,,\n",
         "line 2, column y_px: seen `1e99`, needed a place in the picture"},
        {HEADER "restore,1,1,1,1,,,,,,,b,,\n",
         "line 2, column reason: seen `(blank)`, needed the reason, in words"},
        {HEADER "restore,1,1,1,1,,,,,,a,  ,,\n",
         "line 2, column name: seen `(blank)`, needed the name of who decided it"},
        {HEADER "cut,1,1,1,1,,,,,,a,b,,\n", "line 2, column cut_s"},
        {"action,droplet,time_s,x_px,y_px,reason,name\ncut,1,1,1,1,a,b\n", "cut_s"},
        {"action,droplet,time_s,x_px,y_px,reason,name\njoin,1,1,1,1,a,b\n", "other_droplet"},
        {HEADER "join,1,1,1,1,,2,1,1,,a,b,,\n", "line 2, column other_y_px"},
        {HEADER "restore,1,1,1,1,,,,,,\"a,b,,\n", "line 2: a quote is opened here and never closed"},
    };
    for (size_t i = 0; i < G_N_ELEMENTS(mistakes); i++) {
        g_autoptr(GError) error = NULL;
        g_array_set_size(desk->results->review, 0);
        g_assert_false(read_text(desk, mistakes[i].text, &error));
        g_test_message("%s", error->message);
        g_assert_nonnull(strstr(error->message, "review.csv: "));
        g_assert_nonnull(strstr(error->message, mistakes[i].says));
    }
}

static void reasons_have_an_end(Desk *desk, const void *unused)
{
    (void)unused;
    g_autofree char *words = g_strnfill(1001, 'x');
    g_autofree char *text = g_strconcat(HEADER "restore,1,1,1,1,,,,,,", words, ",b,,\n", NULL);
    g_autoptr(GError) error = NULL;
    g_assert_false(read_text(desk, text, &error));
    g_assert_nonnull(strstr(error->message, "at most 1000 characters"));
}

static void no_such_file(Desk *desk, const void *unused)
{
    (void)unused;
    g_autoptr(GError) error = NULL;
    g_assert_false(rf_review_read(desk->path, desk->results, &error));
    g_assert_error(error, RF_TABLE_ERROR, RF_TABLE_ERROR_FILE);
}

int main(int argc, char **argv)
{
    g_test_init(&argc, &argv, NULL);
#define ADD(name, function) g_test_add("/review/" name, Desk, NULL, set_up, function, tear_down)
    ADD("reads/every-action", every_action);
    ADD("reads/as-spreadsheets-write", as_spreadsheets_write);
    ADD("reads/no-decisions", no_decisions_is_a_review_too);
    ADD("recording/not-said", silent_about_its_recording);
    ADD("recording/another", of_another_recording);
    ADD("recording/several-files", of_several_files);
    ADD("refuses/mistakes-by-line-and-column", mistakes_are_named);
    ADD("refuses/reason-too-long", reasons_have_an_end);
    ADD("refuses/no-such-file", no_such_file);
    return g_test_run();
}
