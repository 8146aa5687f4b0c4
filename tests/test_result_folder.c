#include "cli/result_folder.h"

#include <errno.h>
#include <glib/gstdio.h>
#include <signal.h>
#include <string.h>
#include <sys/resource.h>
#include <sys/stat.h>
#include <sys/wait.h>
#include <unistd.h>

#include "cli/folder_tree.h"

typedef struct {
    char *root, *target;
} Place;

static void set_up(Place *place, const void *unused)
{
    (void)unused;
    place->root = g_dir_make_tmp("risefall-folder-XXXXXX", NULL);
    g_assert_nonnull(place->root);
    place->target = g_build_filename(place->root, "out", NULL);
}

static void tear_down(Place *place, const void *unused)
{
    (void)unused;
    g_chmod(place->root, 0700);
    rf_folder_tree_remove(place->root);
    g_free(place->root);
    g_free(place->target);
}

static RfResultFolder *begin(const Place *place, const char *text)
{
    g_autoptr(GError) error = NULL;
    RfResultFolder *folder = rf_result_folder_open(place->target, &error);
    g_assert_no_error(error);
    g_assert_true(rf_result_folder_add_text(folder, "summary.json", text, &error));
    g_assert_true(rf_result_folder_add_text(folder, "figures/a.svg", text, &error));
    g_assert_no_error(error);
    return folder;
}

static void write_result(const Place *place, const char *text)
{
    g_autoptr(RfResultFolder) folder = begin(place, text);
    g_autoptr(GError) error = NULL;
    g_assert_true(rf_result_folder_commit(folder, &error));
    g_assert_no_error(error);
}

static void assert_holds(const Place *place, const char *text)
{
    g_autofree char *path = g_build_filename(place->target, "figures", "a.svg", NULL);
    g_autofree char *found = NULL;
    g_assert_true(g_file_get_contents(path, &found, NULL, NULL));
    g_assert_cmpstr(found, ==, text);
}

static unsigned entries(const char *path)
{
    g_autoptr(GDir) dir = g_dir_open(path, 0, NULL);
    unsigned n = 0;
    while (g_dir_read_name(dir)) n++;
    return n;
}

static void appears_on_commit_only(Place *place, const void *unused)
{
    (void)unused;
    g_autoptr(RfResultFolder) folder = begin(place, "one");
    g_assert_false(g_file_test(place->target, G_FILE_TEST_EXISTS));
    g_autoptr(GError) error = NULL;
    g_assert_true(rf_result_folder_commit(folder, &error));
    assert_holds(place, "one");
    g_assert_cmpuint(entries(place->root), ==, 1);
}

static void replaces_whole(Place *place, const void *unused)
{
    (void)unused;
    write_result(place, "one");
    write_result(place, "two");
    assert_holds(place, "two");
    g_assert_cmpuint(entries(place->root), ==, 1);
}

static void plain_renames_replace_too(Place *place, const void *unused)
{
    (void)unused;
    for (int i = 0; i < 2; i++) {
        g_autoptr(RfResultFolder) folder = begin(place, i ? "two" : "one");
        g_autoptr(GError) error = NULL;
        g_assert_true(rf_result_folder_commit_plain(folder, &error));
        g_assert_no_error(error);
    }
    assert_holds(place, "two");
    g_assert_cmpuint(entries(place->root), ==, 1);
}

static void abort_leaves_nothing(Place *place, const void *unused)
{
    (void)unused;
    write_result(place, "one");
    rf_result_folder_free(begin(place, "two"));
    assert_holds(place, "one");
    g_assert_cmpuint(entries(place->root), ==, 1);
}

static void parents_come_and_go(Place *place, const void *unused)
{
    (void)unused;
    g_free(place->target);
    place->target = g_build_filename(place->root, "a", "b", "out", NULL);
    rf_result_folder_free(begin(place, "one"));
    g_assert_cmpuint(entries(place->root), ==, 0);
    write_result(place, "two");
    assert_holds(place, "two");
}

static void foreign_folder_is_refused(Place *place, const void *unused)
{
    (void)unused;
    write_result(place, "one");
    g_autofree char *path = g_build_filename(place->target, "my thesis.txt", NULL);
    g_assert_true(g_file_set_contents(path, "years", -1, NULL));
    g_autoptr(GError) error = NULL;
    g_assert_null(rf_result_folder_open(place->target, &error));
    g_assert_error(error, RF_RESULT_FOLDER_ERROR, RF_RESULT_FOLDER_ERROR_FOREIGN);
    g_assert_nonnull(strstr(error->message, "my thesis.txt"));
    g_clear_error(&error);
    g_assert_false(rf_result_folder_may_replace(place->root, &error));
    g_assert_error(error, RF_RESULT_FOLDER_ERROR, RF_RESULT_FOLDER_ERROR_FOREIGN);
    g_assert_true(g_file_test(path, G_FILE_TEST_EXISTS));
    assert_holds(place, "one");
}

/* Put there while the run was working: found at the last moment. */
static void foreign_file_meanwhile(Place *place, const void *unused)
{
    (void)unused;
    write_result(place, "one");
    g_autoptr(RfResultFolder) folder = begin(place, "two");
    g_autofree char *path = g_build_filename(place->target, "figures", "mine.png", NULL);
    g_assert_true(g_file_set_contents(path, "x", -1, NULL));
    g_autoptr(GError) error = NULL;
    g_assert_false(rf_result_folder_commit(folder, &error));
    g_assert_error(error, RF_RESULT_FOLDER_ERROR, RF_RESULT_FOLDER_ERROR_FOREIGN);
    assert_holds(place, "one");
}

static void empty_folder_is_fine(Place *place, const void *unused)
{
    (void)unused;
    g_assert_cmpint(g_mkdir(place->target, 0700), ==, 0);
    write_result(place, "one");
    assert_holds(place, "one");
}

static void file_and_working_folder_are_refused(Place *place, const void *unused)
{
    (void)unused;
    g_autoptr(GError) error = NULL;
    g_assert_true(g_file_set_contents(place->target, "x", -1, NULL));
    g_assert_null(rf_result_folder_open(place->target, &error));
    g_assert_error(error, RF_RESULT_FOLDER_ERROR, RF_RESULT_FOLDER_ERROR_PLACE);
    g_clear_error(&error);
    g_assert_null(rf_result_folder_open(".", &error));
    g_assert_error(error, RF_RESULT_FOLDER_ERROR, RF_RESULT_FOLDER_ERROR_PLACE);
    g_clear_error(&error);
    g_assert_null(rf_result_folder_open("/", &error));
    g_assert_error(error, RF_RESULT_FOLDER_ERROR, RF_RESULT_FOLDER_ERROR_PLACE);
}

/* A child that is killed in the middle leaves its temporary folder; the next run takes it away. */
static void leftover_of_a_dead_run_is_cleared(Place *place, const void *unused)
{
    (void)unused;
    write_result(place, "one");
    const pid_t child = fork();
    if (child == 0) {
        begin(place, "half");
        kill(getpid(), SIGKILL);
    }
    waitpid(child, NULL, 0);
    g_assert_cmpuint(entries(place->root), ==, 2);
    assert_holds(place, "one");
    write_result(place, "two");
    assert_holds(place, "two");
    g_assert_cmpuint(entries(place->root), ==, 1);
}

static void interrupted_plain_rename_is_undone(Place *place, const void *unused)
{
    (void)unused;
    write_result(place, "one");
    g_autofree char *aside = g_build_filename(place->root, ".out.earlier-1", NULL);
    g_assert_cmpint(g_rename(place->target, aside), ==, 0);
    rf_result_folder_free(begin(place, "two"));
    assert_holds(place, "one");
    g_assert_cmpuint(entries(place->root), ==, 1);
}

static void two_runs_at_once(Place *place, const void *unused)
{
    (void)unused;
    g_autoptr(RfResultFolder) first = begin(place, "first"), second = begin(place, "second");
    g_autoptr(GError) error = NULL;
    g_assert_cmpstr(rf_result_folder_path(first), !=, rf_result_folder_path(second));
    g_assert_true(rf_result_folder_commit(second, &error));
    assert_holds(place, "second");
    g_assert_true(rf_result_folder_commit(first, &error));
    assert_holds(place, "first");
    g_assert_cmpuint(entries(place->root), ==, 1);
}

/* ---- what people save into it ---- */

static void save(const Place *place, const char *name, const char *text)
{
    g_autofree char *path = g_build_filename(place->target, name, NULL);
    g_assert_true(g_file_set_contents(path, text, -1, NULL));
}

static void assert_saved(const Place *place, const char *name, const char *text)
{
    g_autofree char *path = g_build_filename(place->target, name, NULL), *seen = NULL;
    g_assert_true(g_file_get_contents(path, &seen, NULL, NULL));
    g_assert_cmpstr(seen, ==, text);
}

/* Whatever the moment of the kill, the target is the old folder or the new one, whole, and what people saved is in it. */
static void kill_at_any_moment(Place *place, const void *unused)
{
    (void)unused;
    write_result(place, "0");
    save(place, "review.csv", "mine");
    unsigned replaced = 0;
    for (int i = 1; i <= 60; i++) {
        const pid_t child = fork();
        if (child == 0) {
            for (int k = 0;; k++) {
                g_autofree char *text = g_strdup_printf("%d", k);
                write_result(place, text);
            }
        }
        g_usleep((gulong)(i * 331 % 9000));
        kill(child, SIGKILL);
        waitpid(child, NULL, 0);
        g_autofree char *summary = g_build_filename(place->target, "summary.json", NULL), *text = NULL;
        g_assert_true(g_file_get_contents(summary, &text, NULL, NULL));
        assert_holds(place, text);
        assert_saved(place, "review.csv", "mine");
        replaced += strcmp(text, "0") != 0;
    }
    g_test_message("60 kills, %u of them after a replacement", replaced);
    write_result(place, "end");
    g_assert_cmpuint(entries(place->root), ==, 1);
}

/* A limit on file size stands in for a full disk: write() fails in the same place. */
static void full_disk_keeps_the_earlier_result(Place *place, const void *unused)
{
    (void)unused;
    write_result(place, "one");
    struct rlimit before;
    getrlimit(RLIMIT_FSIZE, &before);
    const struct rlimit tight = {4096, before.rlim_max};
    signal(SIGXFSZ, SIG_IGN);
    setrlimit(RLIMIT_FSIZE, &tight);
    g_autoptr(RfResultFolder) folder = rf_result_folder_open(place->target, NULL);
    g_autofree char *big = g_malloc0(100000);
    g_autoptr(GError) error = NULL;
    const bool is_added = rf_result_folder_add(folder, "paths.csv", big, 100000, &error);
    setrlimit(RLIMIT_FSIZE, &before);
    g_assert_false(is_added);
    g_assert_error(error, RF_RESULT_FOLDER_ERROR, RF_RESULT_FOLDER_ERROR_WRITE);
    g_assert_nonnull(strstr(error->message, "out/paths.csv"));
    g_assert_nonnull(strstr(error->message, "untouched"));
    assert_holds(place, "one");
}

static void read_only_place_is_named(Place *place, const void *unused)
{
    (void)unused;
    if (geteuid() == 0) { /* root may write anywhere, but not into /proc */
        g_free(place->target);
        place->target = g_strdup("/proc/risefall-out");
    } else {
        g_chmod(place->root, 0500);
    }
    g_autoptr(GError) error = NULL;
    g_assert_null(rf_result_folder_open(place->target, &error));
    g_assert_error(error, RF_RESULT_FOLDER_ERROR, RF_RESULT_FOLDER_ERROR_WRITE);
}

static void link_to_a_folder_stays_a_link(Place *place, const void *unused)
{
    (void)unused;
    write_result(place, "one");
    g_autofree char *link = g_build_filename(place->root, "latest", NULL);
    g_assert_cmpint(symlink("out", link), ==, 0);
    g_autoptr(RfResultFolder) folder = rf_result_folder_open(link, NULL);
    g_assert_true(rf_result_folder_add_text(folder, "figures/a.svg", "two", NULL));
    g_assert_true(rf_result_folder_commit(folder, NULL));
    g_assert_true(g_file_test(link, G_FILE_TEST_IS_SYMLINK));
    assert_holds(place, "two");
}

static void add(const char *path, void (*test)(Place *, const void *))
{
    g_test_add(path, Place, NULL, set_up, test, tear_down);
}

/* Saved beside the report, under the names that browsers give: there after every further run, whatever was written. */
static void reviews_are_taken_over(Place *place, const void *unused)
{
    (void)unused;
    write_result(place, "first");
    save(place, "review.csv", "mine");
    save(place, "review (1).csv", "mine too");
    write_result(place, "second");
    write_result(place, "third");
    assert_saved(place, "summary.json", "third");
    assert_saved(place, "review.csv", "mine");
    assert_saved(place, "review (1).csv", "mine too");
}

static void reviews_are_taken_over_by_plain_renames(Place *place, const void *unused)
{
    (void)unused;
    write_result(place, "first");
    save(place, "review.csv", "mine");
    g_autoptr(RfResultFolder) folder = begin(place, "second");
    g_autoptr(GError) error = NULL;
    save(place, "review.csv", "changed while it ran");
    g_assert_true(rf_result_folder_commit_plain(folder, &error));
    g_assert_no_error(error);
    assert_saved(place, "summary.json", "second");
    assert_saved(place, "review.csv", "changed while it ran");
}

/* Given up or refused, a run leaves the review where it was. */
static void reviews_stay_without_a_commit(Place *place, const void *unused)
{
    (void)unused;
    write_result(place, "first");
    save(place, "review.csv", "mine");
    RfResultFolder *folder = begin(place, "second");
    rf_result_folder_free(folder);
    assert_saved(place, "summary.json", "first");
    assert_saved(place, "review.csv", "mine");
}

/* Only files at the top, and only of that name. */
static void other_files_are_refused_still(Place *place, const void *unused)
{
    (void)unused;
    write_result(place, "first");
    const char *const names[] = {"preview.csv", "review.txt", "figures/review.csv", "my review.csv"};
    for (size_t i = 0; i < G_N_ELEMENTS(names); i++) {
        g_autoptr(GError) error = NULL;
        save(place, names[i], "mine");
        g_assert_false(rf_result_folder_may_replace(place->target, &error));
        g_assert_error(error, RF_RESULT_FOLDER_ERROR, RF_RESULT_FOLDER_ERROR_FOREIGN);
        g_assert_nonnull(strstr(error->message, names[i]));
        g_autofree char *path = g_build_filename(place->target, names[i], NULL);
        g_assert_cmpint(g_remove(path), ==, 0);
    }
}

int main(int argc, char **argv)
{
    g_test_init(&argc, &argv, NULL);
    add("/result_folder/commit/appears-then-only", appears_on_commit_only);
    add("/result_folder/commit/replaces-whole", replaces_whole);
    add("/result_folder/commit/plain-renames-replace-too", plain_renames_replace_too);
    add("/result_folder/commit/two-runs-at-once", two_runs_at_once);
    add("/result_folder/commit/kill-at-any-moment", kill_at_any_moment);
    add("/result_folder/commit/link-stays-a-link", link_to_a_folder_stays_a_link);
    add("/result_folder/reviews/taken-over", reviews_are_taken_over);
    add("/result_folder/reviews/plain-renames-too", reviews_are_taken_over_by_plain_renames);
    add("/result_folder/reviews/stay-without-commit", reviews_stay_without_a_commit);
    add("/result_folder/reviews/other-files-refused", other_files_are_refused_still);
    add("/result_folder/free/abort-leaves-nothing", abort_leaves_nothing);
    add("/result_folder/free/parents-come-and-go", parents_come_and_go);
    add("/result_folder/open/empty-folder-is-fine", empty_folder_is_fine);
    add("/result_folder/open/leftover-is-cleared", leftover_of_a_dead_run_is_cleared);
    add("/result_folder/open/interrupted-plain-rename-is-undone", interrupted_plain_rename_is_undone);
    add("/result_folder/refuses/foreign-folder", foreign_folder_is_refused);
    add("/result_folder/refuses/foreign-file-meanwhile", foreign_file_meanwhile);
    add("/result_folder/refuses/file-and-working-folder", file_and_working_folder_are_refused);
    add("/result_folder/refuses/full-disk", full_disk_keeps_the_earlier_result);
    add("/result_folder/refuses/read-only-place", read_only_place_is_named);
    return g_test_run();
}
