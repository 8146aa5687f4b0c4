#include "cli/ledger.h"

#include <glib/gstdio.h>
#include <signal.h>
#include <sqlite3.h>
#include <string.h>
#include <sys/wait.h>
#include <unistd.h>

#include "cli/ledger_text.h"
#include "tests/support/sample_results.h"

typedef struct {
    char *folder, *path;
} Place;

static void set_up(Place *place, const void *unused)
{
    (void)unused;
    place->folder = g_dir_make_tmp("risefall-ledger-XXXXXX", NULL);
    place->path = g_build_filename(place->folder, "below", "ledger.sqlite", NULL);
}

static void tear_down(Place *place, const void *unused)
{
    (void)unused;
    g_autofree char *below = g_path_get_dirname(place->path);
    g_autoptr(GDir) dir = g_dir_open(below, 0, NULL);
    for (const char *name; dir && (name = g_dir_read_name(dir));) {
        g_autofree char *path = g_build_filename(below, name, NULL);
        g_unlink(path);
    }
    g_rmdir(below);
    g_rmdir(place->folder);
    g_free(place->folder);
    g_free(place->path);
}

static RfLedgerEntry *sample_entry(const char *day, const char *bench)
{
    g_autoptr(RfResults) results = sample_results_new();
    RfUsedSetting notes[] = {{g_strdup("notes"), g_strdup("date"), g_strdup(day), false, NULL},
                             {g_strdup("notes"), g_strdup("bench"), g_strdup(bench), false, NULL}};
    g_array_append_vals(results->notes, notes, G_N_ELEMENTS(notes));
    return rf_ledger_entry_from_results("run", results, "somewhere/results");
}

static void enter(const char *path, RfLedgerEntry *entry)
{
    g_autoptr(GError) error = NULL;
    g_autoptr(RfLedger) ledger = rf_ledger_open(path, &error);
    g_assert_no_error(error);
    g_assert_true(rf_ledger_enter(ledger, entry, &error));
    g_assert_no_error(error);
    rf_ledger_entry_free(entry);
}

static GPtrArray *listed(const char *path, RfLedgerFilter filter)
{
    g_autoptr(GError) error = NULL;
    g_autoptr(RfLedger) ledger = rf_ledger_open_to_read(path, &error);
    g_assert_no_error(error);
    GPtrArray *entries = rf_ledger_list(ledger, &filter, &error);
    g_assert_no_error(error);
    return entries;
}

static void entry_comes_back_whole(Place *place, const void *unused)
{
    (void)unused;
    g_autoptr(RfLedgerEntry) original = sample_entry("2026-03-14", "A");
    g_autoptr(GError) error = NULL;
    g_autoptr(RfLedger) ledger = rf_ledger_open(place->path, &error);
    g_assert_no_error(error);
    g_assert_true(rf_ledger_enter(ledger, original, &error));
    g_assert_cmpint(original->number, ==, 1);
    g_autoptr(RfLedgerEntry) read = rf_ledger_read(ledger, 1, &error);
    g_assert_no_error(error);
    g_autoptr(GPtrArray) one = g_ptr_array_new(), other = g_ptr_array_new();
    g_ptr_array_add(one, original);
    g_ptr_array_add(other, read);
    /* Notes are read before the other settings: their order differs, so only their number is compared, and one of them. */
    g_assert_cmpuint(read->settings->len, ==, original->settings->len);
    g_assert_cmpstr(rf_ledger_entry_note(read, "bench"), ==, "A");
    g_array_set_size(read->settings, 0);
    g_array_set_size(original->settings, 0);
    g_autofree char *before = rf_ledger_text_json(one), *after = rf_ledger_text_json(other);
    g_assert_cmpstr(before, ==, after);
    g_assert_null(rf_ledger_read(ledger, 2, &error));
    g_assert_error(error, RF_LEDGER_ERROR, RF_LEDGER_ERROR_NUMBER);
}

static void filters_pick(Place *place, const void *unused)
{
    (void)unused;
    static const char *const days[] = {"2026-03-14", "2026-01-02", "2026-04-01"};
    for (size_t i = 0; i < G_N_ELEMENTS(days); i++)
        enter(place->path, sample_entry(days[i], i == 1 ? "B" : "A"));
    static const char *const on_a[] = {"bench=A", NULL}, *const on_b[] = {"bench=B", NULL},
                             *const on_both[] = {"bench=A", "bench=B", NULL};
    const struct {
        RfLedgerFilter filter;
        const char *numbers; /* in the order of the days */
    } cases[] = {
        {{.kind = NULL}, "2 1 3 "},     {{.kind = "audit"}, ""}, {{.since = "2026-03"}, "1 3 "},
        {{.until = "2026-03"}, "2 1 "}, {{.until = "2025"}, ""}, {{.with = on_a}, "1 3 "},
        {{.with = on_b}, "2 "},         {{.with = on_both}, ""}, {{.input = "no such file"}, ""},
    };
    for (size_t i = 0; i < G_N_ELEMENTS(cases); i++) {
        g_autoptr(GPtrArray) entries = listed(place->path, cases[i].filter);
        g_autoptr(GString) numbers = g_string_new(NULL);
        for (guint j = 0; j < entries->len; j++)
            g_string_append_printf(numbers, "%d ", (int)((RfLedgerEntry *)entries->pdata[j])->number);
        g_assert_cmpstr(numbers->str, ==, cases[i].numbers);
    }
    g_autoptr(GPtrArray) all = listed(place->path, (RfLedgerFilter){0});
    const RfInputFile *input = &g_array_index(((RfLedgerEntry *)all->pdata[0])->inputs, RfInputFile, 0);
    g_autofree char *beginning = g_strndup(input->sha256, 8), *name = g_path_get_basename(input->path);
    const char *const ways[] = {beginning, name};
    for (int i = 0; i < 2; i++) {
        g_autoptr(GPtrArray) found = listed(place->path, (RfLedgerFilter){.input = ways[i]});
        g_assert_cmpuint(found->len, ==, 3);
    }
}

/* Format 1 as it was, never to be edited: no figures, no remarks. */
static const char FORMAT_1[] =
    "CREATE TABLE entry(number INTEGER PRIMARY KEY AUTOINCREMENT, kind TEXT NOT NULL, entered TEXT NOT NULL,"
    " measured_on TEXT NOT NULL, version TEXT NOT NULL, sheet TEXT, folder TEXT, measured INTEGER NOT NULL, "
    "verdict TEXT);"
    "CREATE TABLE input(entry INTEGER NOT NULL REFERENCES entry(number), role TEXT NOT NULL, path TEXT NOT "
    "NULL,"
    " sha256 TEXT NOT NULL);"
    "CREATE TABLE setting(entry INTEGER NOT NULL REFERENCES entry(number), part TEXT NOT NULL, key TEXT NOT "
    "NULL,"
    " value TEXT NOT NULL, is_default INTEGER NOT NULL);"
    "CREATE INDEX input_entry ON input(entry); CREATE INDEX setting_entry ON setting(entry, part);"
    "PRAGMA application_id = 1919306855; PRAGMA user_version = 1;"
    "INSERT INTO entry VALUES(7, 'run', '2025-05-06T07:08:09Z', '2025-05-06', '0.0.9', NULL, '/old', 1, 'an "
    "old one');"
    "INSERT INTO setting VALUES(7, 'notes', 'bench', 'A', 0);";

static void execute(const char *path, const char *sql)
{
    g_autofree char *folder = g_path_get_dirname(path);
    g_mkdir_with_parents(folder, 0700);
    sqlite3 *db;
    g_assert_cmpint(sqlite3_open(path, &db), ==, SQLITE_OK);
    g_assert_cmpint(sqlite3_exec(db, sql, NULL, NULL, NULL), ==, SQLITE_OK);
    sqlite3_close(db);
}

static void older_format_is_brought_up_to_date(Place *place, const void *unused)
{
    (void)unused;
    execute(place->path, FORMAT_1);
    g_autoptr(GPtrArray) before = listed(place->path, (RfLedgerFilter){0});
    g_assert_cmpuint(before->len, ==, 1);
    g_assert_cmpstr(rf_ledger_entry_note(before->pdata[0], "bench"), ==, "A");
    enter(place->path, sample_entry("2026-03-14", "A"));
    g_autoptr(GPtrArray) after = listed(place->path, (RfLedgerFilter){0});
    g_assert_cmpuint(after->len, ==, 2);
    g_assert_cmpstr(((RfLedgerEntry *)after->pdata[0])->verdict, ==, "an old one");
    g_assert_nonnull(rf_ledger_entry_figure(after->pdata[1], "unit_charge_C"));
}

static void assert_left_alone(const char *path, RfLedgerError code)
{
    g_autofree char *before = NULL, *after = NULL;
    gsize before_length, after_length;
    g_assert_true(g_file_get_contents(path, &before, &before_length, NULL));
    g_autoptr(GError) error = NULL;
    RfLedger *ledger = rf_ledger_open(path, &error);
    g_assert_null(ledger);
    g_assert_error(error, RF_LEDGER_ERROR, (int)code);
    g_assert_nonnull(strstr(error->message, path));
    g_assert_true(g_file_get_contents(path, &after, &after_length, NULL));
    g_assert_cmpmem(before, before_length, after, after_length);
}

static void damaged_is_left_alone(Place *place, const void *unused)
{
    (void)unused;
    for (int i = 0; i < 40; i++) enter(place->path, sample_entry("2026-03-14", "A"));
    g_autofree char *whole = NULL;
    gsize length;
    g_assert_true(g_file_get_contents(place->path, &whole, &length, NULL));
    g_autofree char *overwritten = g_memdup2(whole, length);
    memset(overwritten + length / 2, 0xa5, 4096 * 3);
    g_assert_true(g_file_set_contents(place->path, overwritten, (gssize)length, NULL));
    assert_left_alone(place->path, RF_LEDGER_ERROR_DAMAGED);
    g_assert_true(
        g_file_set_contents(place->path, whole, (gssize)length / 2, NULL)); /* a copy that was cut short */
    assert_left_alone(place->path, RF_LEDGER_ERROR_DAMAGED);
}

static void foreign_is_left_alone(Place *place, const void *unused)
{
    (void)unused;
    execute(place->path, "CREATE TABLE recipe(name TEXT);");
    assert_left_alone(place->path, RF_LEDGER_ERROR_FOREIGN);
    execute(place->path, "DROP TABLE recipe; PRAGMA application_id = 1919306855; PRAGMA user_version = 999;");
    assert_left_alone(place->path, RF_LEDGER_ERROR_FOREIGN);
    g_assert_true(g_file_set_contents(place->path, "Dear ledger, this is a letter and no database at all.\n",
                                      -1, NULL));
    assert_left_alone(place->path, RF_LEDGER_ERROR_FOREIGN);
}

static void missing_is_said(Place *place, const void *unused)
{
    (void)unused;
    g_autoptr(GError) error = NULL;
    g_assert_null(rf_ledger_open_to_read(place->path, &error));
    g_assert_error(error, RF_LEDGER_ERROR, RF_LEDGER_ERROR_MISSING);
    g_assert_false(g_file_test(place->path, G_FILE_TEST_EXISTS));
}

/* Every entry has all that a whole one has. */
static guint assert_whole(const char *path, RfLedgerEntry *like)
{
    g_autoptr(GError) error = NULL;
    g_autoptr(RfLedger) ledger = rf_ledger_open(path, &error);
    g_assert_no_error(error);
    g_autoptr(GPtrArray) entries = rf_ledger_list(ledger, &(RfLedgerFilter){0}, &error);
    g_assert_no_error(error);
    for (guint i = 0; i < entries->len; i++) {
        g_autoptr(RfLedgerEntry) entry =
            rf_ledger_read(ledger, ((RfLedgerEntry *)entries->pdata[i])->number, &error);
        g_assert_no_error(error);
        g_assert_cmpuint(entry->inputs->len, ==, like->inputs->len);
        g_assert_cmpuint(entry->settings->len, ==, like->settings->len);
        g_assert_cmpuint(entry->figures->len, ==, like->figures->len);
        g_assert_cmpuint(entry->remarks->len, ==, like->remarks->len);
    }
    return entries->len;
}

static G_GNUC_NORETURN void enter_for_ever(const char *path)
{
    for (;;) enter(path, sample_entry("2026-03-14", "A"));
}

static void killed_while_entering(Place *place, const void *unused)
{
    (void)unused;
    enum { KILLS = 100 };
    g_autoptr(RfLedgerEntry) like = sample_entry("2026-03-14", "A");
    enter(place->path, sample_entry("2026-03-14", "A")); /* makes the file */
    const gint64 start_us = g_get_monotonic_time();
    enter(place->path, sample_entry("2026-03-14", "A"));
    const gint64 one_us = CLAMP(g_get_monotonic_time() - start_us, 15000, 300000);
    guint entered = 2;
    g_autoptr(GRand) random = g_rand_new_with_seed(9);
    for (int i = 0; i < KILLS; i++) {
        pid_t child = fork();
        if (child == 0) enter_for_ever(place->path);
        g_usleep(
            (gulong)g_rand_int_range(random, 500, (gint32)(4 * one_us))); /* some are done, some cut short */
        kill(child, SIGKILL);
        waitpid(child, NULL, 0);
        const guint now = assert_whole(place->path, like);
        g_assert_cmpuint(now, >=, entered);
        entered = now;
    }
    g_test_message("%u entries after %d kills within %.3g s, all whole", entered, KILLS,
                   4e-6 * (double)one_us);
    g_assert_cmpuint(entered, >, 2);
}

static void many_write_at_once(Place *place, const void *unused)
{
    (void)unused;
    enum { WRITERS = 4, EACH = 15 };
    pid_t writers[WRITERS];
    for (int i = 0; i < WRITERS; i++) /* the ledger itself is still to be made */
        if ((writers[i] = fork()) == 0) {
            for (int j = 0; j < EACH; j++) enter(place->path, sample_entry("2026-03-14", "A"));
            _exit(0);
        }
    for (int i = 0; i < WRITERS; i++) {
        int status;
        waitpid(writers[i], &status, 0);
        g_assert_cmpint(status, ==, 0);
    }
    g_autoptr(RfLedgerEntry) like = sample_entry("2026-03-14", "A");
    g_assert_cmpuint(assert_whole(place->path, like), ==, WRITERS * EACH);
}

static void table_and_list_say_the_same(Place *place, const void *unused)
{
    (void)unused;
    enter(place->path, sample_entry("2026-03-14", "A \"quoted\", with a comma"));
    g_autoptr(GPtrArray) entries = listed(place->path, (RfLedgerFilter){0});
    g_autofree char *csv = rf_ledger_text_csv(entries), *list = rf_ledger_text_list(entries);
    g_auto(GStrv) lines = g_strsplit(csv, "\n", -1);
    g_assert_cmpuint(g_strv_length(lines), ==, 3); /* head, one row, what is behind the last newline */
    g_assert_true(g_str_has_prefix(
        lines[0], "number,kind,measured_on,entered,version,measured,sheet,results,verdict,"));
    g_assert_nonnull(strstr(lines[0], ",unit_charge_C,u_unit_charge_C"));
    g_assert_true(g_str_has_prefix(lines[1], "1,run,2026-03-14,"));
    g_assert_nonnull(strstr(list, "2026-03-14"));
}

#define CASE(path, function) g_test_add("/ledger/" path, Place, NULL, set_up, function, tear_down)

int main(int argc, char **argv)
{
    g_test_init(&argc, &argv, NULL);
    CASE("entry/comes-back-whole", entry_comes_back_whole);
    CASE("list/filters", filters_pick);
    CASE("list/as-text", table_and_list_say_the_same);
    CASE("format/older", older_format_is_brought_up_to_date);
    CASE("refused/damaged", damaged_is_left_alone);
    CASE("refused/foreign", foreign_is_left_alone);
    CASE("refused/missing", missing_is_said);
    CASE("writers/killed", killed_while_entering);
    CASE("writers/at-once", many_write_at_once);
    return g_test_run();
}
