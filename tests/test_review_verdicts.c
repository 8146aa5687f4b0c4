#include "cli/review_verdicts.h"

#include <string.h>

#include "tests/support/straight_paths.h"

typedef struct {
    RfResults *results;
} Desk;

static void add_droplet(RfResults *results, unsigned droplet, unsigned spell, bool has_charge,
                        const char *reason)
{
    const RfDropletRow row = {.droplet = droplet,
                              .spell = spell,
                              .has_charge = has_charge,
                              .charge_C = {3.2e-19, 1e-21},
                              .accepted = *reason == '\0',
                              .reason = g_strdup(reason)};
    g_array_append_val(results->droplets, row);
}

/* 1 accepted; 2 set aside; 3 without a charge; 4 with a spell of each kind. */
static void set_up(Desk *desk, const void *unused)
{
    (void)unused;
    RfResults *results = desk->results = rf_results_new();
    for (unsigned droplet = 1; droplet <= 4; droplet++)
        straight_paths_add(results->paths, droplet, 0, 5, 0, 50 * droplet, 20);
    add_droplet(results, 1, 1, true, "");
    add_droplet(results, 2, 1, true, "charge too uncertain: u = 1e-19 C");
    add_droplet(results, 3, 1, false, "radius only");
    add_droplet(results, 4, 1, true, "");
    add_droplet(results, 4, 2, true, "charge too uncertain: u = 2e-19 C");
    add_droplet(results, 4, 3, false, "radius only");
}

static void tear_down(Desk *desk, const void *unused)
{
    (void)unused;
    rf_results_free(desk->results);
}

static void decide(Desk *desk, RfReviewAction action, unsigned droplet, const char *name)
{
    const RfReviewRow entry = {.line = desk->results->review->len + 2,
                               .action = action,
                               .place = {droplet, 2, 40, 50 * droplet},
                               .reason = g_strdup("because"),
                               .name = g_strdup(name),
                               .date = g_strdup(""),
                               .detail = g_strdup("")};
    g_array_append_val(desk->results->review, entry);
}

static const RfDropletRow *row(const Desk *desk, guint i)
{
    return &g_array_index(desk->results->droplets, RfDropletRow, i);
}

static const RfReviewRow *entry(const Desk *desk, guint i)
{
    return &g_array_index(desk->results->review, RfReviewRow, i);
}

static void assert_row(const Desk *desk, guint i, bool is_accepted, bool is_overruled, const char *reason)
{
    g_assert_cmpint(row(desk, i)->accepted, ==, is_accepted);
    g_assert_cmpint(row(desk, i)->is_overruled, ==, is_overruled);
    g_assert_cmpstr(row(desk, i)->reason, ==, reason);
}

static void sets_aside(Desk *desk, const void *unused)
{
    (void)unused;
    decide(desk, RF_REVIEW_SET_ASIDE, 1, "A");
    rf_review_verdicts_apply(desk->results);
    assert_row(desk, 0, false, true, "set aside by A: because");
    assert_row(desk, 1, false, false, "charge too uncertain: u = 1e-19 C");
    g_assert_cmpint(entry(desk, 0)->outcome, ==, RF_REVIEW_HONOURED);
    g_assert_cmpstr(entry(desk, 0)->detail, ==, "droplet 1 was set aside");
    g_assert_cmpuint(entry(desk, 0)->now, ==, 1);
}

/* What the program held against it stays in sight. */
static void restores(Desk *desk, const void *unused)
{
    (void)unused;
    decide(desk, RF_REVIEW_RESTORE, 2, "A");
    rf_review_verdicts_apply(desk->results);
    assert_row(desk, 1, true, true, "restored by A: because; before: charge too uncertain: u = 1e-19 C");
    g_assert_cmpstr(entry(desk, 0)->detail, ==,
                    "droplet 2 was restored; before: charge too uncertain: u = 1e-19 C");
}

static void no_charge_no_restoring(Desk *desk, const void *unused)
{
    (void)unused;
    decide(desk, RF_REVIEW_RESTORE, 3, "A");
    rf_review_verdicts_apply(desk->results);
    rf_review_verdicts_warn(desk->results);
    assert_row(desk, 2, false, false, "radius only");
    g_assert_cmpint(entry(desk, 0)->outcome, ==, RF_REVIEW_NOT_POSSIBLE);
    g_assert_cmpuint(desk->results->warnings->len, ==, 1);
    g_assert_cmpstr(
        desk->results->warnings->pdata[0], ==,
        "review, line 2: restore droplet 3: not done: droplet 3 has no charge that could be accepted: "
        "radius only");
}

static void spells_go_together(Desk *desk, const void *unused)
{
    (void)unused;
    decide(desk, RF_REVIEW_RESTORE, 4, "A");
    rf_review_verdicts_apply(desk->results);
    assert_row(desk, 3, true, false, "");
    assert_row(desk, 4, true, true, "restored by A: because; before: charge too uncertain: u = 2e-19 C");
    assert_row(desk, 5, false, false, "radius only");
    g_assert_nonnull(strstr(entry(desk, 0)->detail, "those of its spells that could be"));
}

static void asked_for_what_is(Desk *desk, const void *unused)
{
    (void)unused;
    decide(desk, RF_REVIEW_RESTORE, 1, "A");
    decide(desk, RF_REVIEW_SET_ASIDE, 2, "A");
    rf_review_verdicts_apply(desk->results);
    rf_review_verdicts_warn(desk->results);
    for (guint i = 0; i < 2; i++) g_assert_cmpint(entry(desk, i)->outcome, ==, RF_REVIEW_ALREADY);
    g_assert_cmpstr(entry(desk, 1)->detail, ==,
                    "droplet 2 was set aside without it: charge too uncertain: u = 1e-19 C");
    g_assert_cmpuint(desk->results->warnings->len, ==, 0);
    assert_row(desk, 1, false, false, "charge too uncertain: u = 1e-19 C");
}

/* Two people of two minds: the later entry has it, and both names stay. */
static void the_later_has_it(Desk *desk, const void *unused)
{
    (void)unused;
    decide(desk, RF_REVIEW_SET_ASIDE, 1, "A");
    decide(desk, RF_REVIEW_RESTORE, 1, "B");
    rf_review_verdicts_apply(desk->results);
    assert_row(desk, 0, true, false, "restored by B: because; before: set aside by A: because");
}

static void nobody_there(Desk *desk, const void *unused)
{
    (void)unused;
    decide(desk, RF_REVIEW_SET_ASIDE, 9, "A");
    rf_review_verdicts_apply(desk->results);
    rf_review_verdicts_warn(desk->results);
    g_assert_cmpint(entry(desk, 0)->outcome, ==, RF_REVIEW_NOT_FOUND);
    g_assert_cmpuint(desk->results->warnings->len, ==, 1);
    g_assert_true(
        g_str_has_prefix(desk->results->warnings->pdata[0],
                         "review, line 2: set aside droplet 9: not done: no droplet was within 3 px of"));
}

int main(int argc, char **argv)
{
    g_test_init(&argc, &argv, NULL);
#define ADD(name, function) g_test_add("/review-verdicts/" name, Desk, NULL, set_up, function, tear_down)
    ADD("set-aside", sets_aside);
    ADD("restore", restores);
    ADD("restore/no-charge", no_charge_no_restoring);
    ADD("restore/spells-go-together", spells_go_together);
    ADD("as-it-is", asked_for_what_is);
    ADD("two-minds", the_later_has_it);
    ADD("nobody-there", nobody_there);
    return g_test_run();
}
