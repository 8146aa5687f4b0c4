#include "cli/ledger.h"

#include <errno.h>
#include <glib/gstdio.h>
#include <sqlite3.h>
#include <string.h>

enum {
    APPLICATION = 0x72664c67, /* "rfLg": says whose file it is */
    FORMAT = 2,
    WAIT_MS = 30000,
};

/* Each brings a ledger from format i to i + 1; what has been written by a released format is never edited here. */
static const char *const steps[FORMAT] = {
    /* 1: entries with what went in */
    "CREATE TABLE entry(number INTEGER PRIMARY KEY AUTOINCREMENT, kind TEXT NOT NULL, entered TEXT NOT NULL,"
    " measured_on TEXT NOT NULL, version TEXT NOT NULL, sheet TEXT, folder TEXT, measured INTEGER NOT NULL, "
    "verdict TEXT);"
    "CREATE TABLE input(entry INTEGER NOT NULL REFERENCES entry(number), role TEXT NOT NULL, path TEXT NOT "
    "NULL,"
    " sha256 TEXT NOT NULL);"
    "CREATE TABLE setting(entry INTEGER NOT NULL REFERENCES entry(number), part TEXT NOT NULL, key TEXT NOT "
    "NULL,"
    " value TEXT NOT NULL, is_default INTEGER NOT NULL);"
    "CREATE INDEX input_entry ON input(entry);"
    "CREATE INDEX setting_entry ON setting(entry, part);"
    "PRAGMA application_id = 1919306855;",
    /* 2: figures to follow over months, and what was remarked */
    "CREATE TABLE figure(entry INTEGER NOT NULL REFERENCES entry(number), name TEXT NOT NULL, value REAL NOT "
    "NULL,"
    " sigma REAL NOT NULL);"
    "CREATE TABLE remark(entry INTEGER NOT NULL REFERENCES entry(number), kind TEXT NOT NULL, text TEXT NOT "
    "NULL);"
    "CREATE INDEX figure_entry ON figure(entry);"
    "CREATE INDEX remark_entry ON remark(entry);",
};
G_STATIC_ASSERT(APPLICATION == 1919306855);

struct RfLedger {
    sqlite3 *db;
    char *path;
    int format; /* of the file; 0: nothing in it yet */
};

G_DEFINE_QUARK(rf - ledger - error, rf_ledger_error)

char *rf_ledger_place(const char *option)
{
    if (option) return *option ? g_strdup(option) : NULL;
    const char *variable = g_getenv("RISEFALL_LEDGER");
    if (variable) return *variable ? g_strdup(variable) : NULL;
    return g_build_filename(g_get_user_data_dir(), "risefall", "ledger.sqlite", NULL);
}

/* ---- errors ---- */

static bool fail(const RfLedger *ledger, int status, GError **error)
{
    const char *said = ledger->db ? sqlite3_errmsg(ledger->db) : sqlite3_errstr(status);
    switch (status & 0xff) {
    case SQLITE_NOTADB:
        g_set_error(error, RF_LEDGER_ERROR, RF_LEDGER_ERROR_FOREIGN,
                    "ledger %s: no ledger, or its beginning is damaged; it is left as it is", ledger->path);
        return false;
    case SQLITE_CORRUPT:
        g_set_error(error, RF_LEDGER_ERROR, RF_LEDGER_ERROR_DAMAGED,
                    "ledger %s: damaged (%s); it is left as it is: restore it from a copy, or move it away "
                    "to begin a new one",
                    ledger->path, said);
        return false;
    case SQLITE_BUSY:
    case SQLITE_LOCKED:
        g_set_error(error, RF_LEDGER_ERROR, RF_LEDGER_ERROR_WRITE,
                    "ledger %s: another program has held it for more than %d s", ledger->path,
                    WAIT_MS / 1000);
        return false;
    default:
        g_set_error(error, RF_LEDGER_ERROR, RF_LEDGER_ERROR_WRITE, "ledger %s: %s", ledger->path, said);
        return false;
    }
}

static bool run(RfLedger *ledger, const char *sql, GError **error)
{
    int status = sqlite3_exec(ledger->db, sql, NULL, NULL, NULL);
    return status == SQLITE_OK || fail(ledger, status, error);
}

/* The first number of the first row. */
static bool ask_number(RfLedger *ledger, const char *sql, int *answer, GError **error)
{
    sqlite3_stmt *query = NULL;
    int status = sqlite3_prepare_v2(ledger->db, sql, -1, &query, NULL);
    if (status == SQLITE_OK) status = sqlite3_step(query);
    if (status == SQLITE_ROW) *answer = sqlite3_column_int(query, 0);
    sqlite3_finalize(query);
    return status == SQLITE_ROW || fail(ledger, status, error);
}

static bool is_sound(RfLedger *ledger, GError **error)
{
    sqlite3_stmt *query = NULL;
    int status = sqlite3_prepare_v2(ledger->db, "PRAGMA quick_check(1)", -1, &query, NULL);
    if (status == SQLITE_OK) status = sqlite3_step(query);
    const bool is_ok =
        status == SQLITE_ROW && g_strcmp0((const char *)sqlite3_column_text(query, 0), "ok") == 0;
    sqlite3_finalize(query);
    if (is_ok) return true;
    return fail(ledger, status == SQLITE_ROW ? SQLITE_CORRUPT : status, error);
}

/* ---- open ---- */

static bool read_marks(RfLedger *ledger, int *application, int *tables, GError **error)
{
    /* One view of the file: another program may be making it just now. */
    if (!run(ledger, "BEGIN", error)) return false;
    const bool is_well = ask_number(ledger, "PRAGMA application_id", application, error) &&
                         ask_number(ledger, "PRAGMA user_version", &ledger->format, error) &&
                         ask_number(ledger, "SELECT count(*) FROM sqlite_master", tables, error);
    sqlite3_exec(ledger->db, "ROLLBACK", NULL, NULL, NULL);
    return is_well;
}

static bool is_ours(RfLedger *ledger, GError **error)
{
    int application = 0, tables = 0;
    if (!read_marks(ledger, &application, &tables, error)) return false;
    const bool is_new = application == 0 && ledger->format == 0 && tables == 0;
    if (!is_new && application != APPLICATION) {
        g_set_error(error, RF_LEDGER_ERROR, RF_LEDGER_ERROR_FOREIGN,
                    "ledger %s: a database of another program; it is left as it is", ledger->path);
        return false;
    }
    if (ledger->format <= FORMAT) return true;
    g_set_error(error, RF_LEDGER_ERROR, RF_LEDGER_ERROR_FOREIGN,
                "ledger %s: written by a newer risefall (format %d, this one knows up to %d)", ledger->path,
                ledger->format, FORMAT);
    return false;
}

/* Inside one transaction, so that two programs that find an old ledger don't both change it. */
static bool bring_up_to_date(RfLedger *ledger, GError **error)
{
    if (ledger->format == FORMAT) return true;
    if (!run(ledger, "BEGIN IMMEDIATE", error)) return false;
    bool is_well = ask_number(ledger, "PRAGMA user_version", &ledger->format, error);
    for (; is_well && ledger->format < FORMAT; ledger->format++)
        is_well = run(ledger, steps[ledger->format], error);
    g_autofree char *mark = g_strdup_printf("PRAGMA user_version = %d", FORMAT);
    if (is_well && run(ledger, mark, error) && run(ledger, "COMMIT", error)) return true;
    sqlite3_exec(ledger->db, "ROLLBACK", NULL, NULL, NULL);
    return false;
}

static RfLedger *open_file(const char *path, int flags, GError **error)
{
    g_autoptr(RfLedger) ledger = g_new0(RfLedger, 1);
    ledger->path = g_strdup(path);
    int status = sqlite3_open_v2(path, &ledger->db, flags, NULL);
    if (status != SQLITE_OK) {
        fail(ledger, status, error);
        return NULL;
    }
    sqlite3_busy_timeout(ledger->db, WAIT_MS);
    return is_ours(ledger, error) ? g_steal_pointer(&ledger) : NULL;
}

RfLedger *rf_ledger_open(const char *path, GError **error)
{
    g_autofree char *folder = g_path_get_dirname(path);
    if (g_mkdir_with_parents(folder, 0700) != 0) {
        g_set_error(error, RF_LEDGER_ERROR, RF_LEDGER_ERROR_WRITE, "ledger %s: its folder can't be made: %s",
                    path, g_strerror(errno));
        return NULL;
    }
    g_autoptr(RfLedger) ledger = open_file(path, SQLITE_OPEN_READWRITE | SQLITE_OPEN_CREATE, error);
    if (!ledger || !is_sound(ledger, error) || !bring_up_to_date(ledger, error)) return NULL;
    return g_steal_pointer(&ledger);
}

RfLedger *rf_ledger_open_to_read(const char *path, GError **error)
{
    if (!g_file_test(path, G_FILE_TEST_EXISTS)) {
        g_set_error(error, RF_LEDGER_ERROR, RF_LEDGER_ERROR_MISSING,
                    "ledger %s: there is none yet; `risefall run` begins one", path);
        return NULL;
    }
    /* Not read-only: what a killed program left half done must be undone before anything can be read. */
    return open_file(path, SQLITE_OPEN_READWRITE, error);
}

void rf_ledger_close(RfLedger *ledger)
{
    if (!ledger) return;
    sqlite3_close(ledger->db);
    g_free(ledger->path);
    g_free(ledger);
}

/* ---- enter ---- */

static void bind_text(sqlite3_stmt *statement, int at, const char *text)
{
    sqlite3_bind_text(statement, at, text, -1, SQLITE_STATIC); /* NULL binds NULL */
}

/* Puts one row in and makes the statement ready for the next. */
static bool put(RfLedger *ledger, sqlite3_stmt *statement, GError **error)
{
    int status = sqlite3_step(statement);
    sqlite3_reset(statement);
    return status == SQLITE_DONE || fail(ledger, status, error);
}

static sqlite3_stmt *prepare(RfLedger *ledger, const char *sql, GError **error)
{
    sqlite3_stmt *statement = NULL;
    int status = sqlite3_prepare_v2(ledger->db, sql, -1, &statement, NULL);
    if (status != SQLITE_OK) fail(ledger, status, error);
    return statement;
}

static bool put_entry(RfLedger *ledger, RfLedgerEntry *entry, GError **error)
{
    sqlite3_stmt *s =
        prepare(ledger,
                "INSERT INTO entry(kind, entered, measured_on, version, sheet, folder, measured, verdict)"
                " VALUES(?, ?, ?, ?, ?, ?, ?, ?)",
                error);
    if (!s) return false;
    const char *texts[] = {entry->kind,    entry->entered, entry->measured_on,
                           entry->version, entry->sheet,   entry->folder};
    for (int i = 0; i < (int)G_N_ELEMENTS(texts); i++) bind_text(s, i + 1, texts[i]);
    sqlite3_bind_int(s, 7, entry->measured);
    bind_text(s, 8, entry->verdict);
    bool is_well = put(ledger, s, error);
    sqlite3_finalize(s);
    entry->number = is_well ? sqlite3_last_insert_rowid(ledger->db) : 0;
    return is_well;
}

typedef void (*BindRow)(sqlite3_stmt *statement, const GArray *rows, guint i);

static void bind_input(sqlite3_stmt *statement, const GArray *rows, guint i)
{
    const RfInputFile *input = &g_array_index(rows, RfInputFile, i);
    bind_text(statement, 2, input->role);
    bind_text(statement, 3, input->path);
    bind_text(statement, 4, input->sha256);
}

static void bind_setting(sqlite3_stmt *statement, const GArray *rows, guint i)
{
    const RfUsedSetting *setting = &g_array_index(rows, RfUsedSetting, i);
    bind_text(statement, 2, setting->group);
    bind_text(statement, 3, setting->key);
    bind_text(statement, 4, setting->value);
    sqlite3_bind_int(statement, 5, setting->is_default);
}

static void bind_figure(sqlite3_stmt *statement, const GArray *rows, guint i)
{
    const RfLedgerFigure *figure = &g_array_index(rows, RfLedgerFigure, i);
    bind_text(statement, 2, figure->name);
    sqlite3_bind_double(statement, 3, figure->value.value);
    sqlite3_bind_double(statement, 4, figure->value.sigma);
}

static void bind_remark(sqlite3_stmt *statement, const GArray *rows, guint i)
{
    const RfLedgerRemark *remark = &g_array_index(rows, RfLedgerRemark, i);
    bind_text(statement, 2, remark->kind);
    bind_text(statement, 3, remark->text);
}

static bool put_rows(RfLedger *ledger, const char *sql, gint64 number, const GArray *rows, BindRow bind,
                     GError **error)
{
    sqlite3_stmt *statement = prepare(ledger, sql, error);
    bool is_well = statement != NULL;
    for (guint i = 0; is_well && i < rows->len; i++) {
        sqlite3_bind_int64(statement, 1, number);
        bind(statement, rows, i);
        is_well = put(ledger, statement, error);
    }
    sqlite3_finalize(statement);
    return is_well;
}

static bool put_all(RfLedger *ledger, RfLedgerEntry *entry, GError **error)
{
    return put_entry(ledger, entry, error) &&
           put_rows(ledger, "INSERT INTO input VALUES(?, ?, ?, ?)", entry->number, entry->inputs, bind_input,
                    error) &&
           put_rows(ledger, "INSERT INTO setting VALUES(?, ?, ?, ?, ?)", entry->number, entry->settings,
                    bind_setting, error) &&
           put_rows(ledger, "INSERT INTO figure VALUES(?, ?, ?, ?)", entry->number, entry->figures,
                    bind_figure, error) &&
           put_rows(ledger, "INSERT INTO remark VALUES(?, ?, ?)", entry->number, entry->remarks, bind_remark,
                    error);
}

bool rf_ledger_enter(RfLedger *ledger, RfLedgerEntry *entry, GError **error)
{
    if (!run(ledger, "BEGIN IMMEDIATE", error)) return false;
    if (put_all(ledger, entry, error) && run(ledger, "COMMIT", error)) return true;
    sqlite3_exec(ledger->db, "ROLLBACK", NULL, NULL, NULL);
    entry->number = 0;
    return false;
}

/* ---- read ---- */

static char *column_text(sqlite3_stmt *statement, int at)
{
    return g_strdup((const char *)sqlite3_column_text(statement, at));
}

#define ENTRY_COLUMNS "number, kind, entered, measured_on, version, sheet, folder, measured, verdict"

static RfLedgerEntry *take_entry(sqlite3_stmt *row)
{
    RfLedgerEntry *entry = rf_ledger_entry_new("");
    char **texts[] = {&entry->kind,    &entry->entered, &entry->measured_on,
                      &entry->version, &entry->sheet,   &entry->folder};
    for (int i = 0; i < (int)G_N_ELEMENTS(texts); i++) {
        g_free(*texts[i]);
        *texts[i] = column_text(row, i + 1);
    }
    entry->number = sqlite3_column_int64(row, 0);
    entry->measured = sqlite3_column_int(row, 7);
    entry->verdict = column_text(row, 8);
    return entry;
}

static void take_input(RfLedgerEntry *entry, sqlite3_stmt *row)
{
    RfInputFile input = {column_text(row, 0), column_text(row, 1), column_text(row, 2)};
    g_array_append_val(entry->inputs, input);
}

static void take_setting(RfLedgerEntry *entry, sqlite3_stmt *row)
{
    RfUsedSetting setting = {column_text(row, 0), column_text(row, 1), column_text(row, 2),
                             sqlite3_column_int(row, 3), NULL};
    g_array_append_val(entry->settings, setting);
}

static void take_figure(RfLedgerEntry *entry, sqlite3_stmt *row)
{
    RfLedgerFigure figure = {column_text(row, 0),
                             {sqlite3_column_double(row, 1), sqlite3_column_double(row, 2)}};
    g_array_append_val(entry->figures, figure);
}

static void take_remark(RfLedgerEntry *entry, sqlite3_stmt *row)
{
    RfLedgerRemark remark = {column_text(row, 0), column_text(row, 1)};
    g_array_append_val(entry->remarks, remark);
}

typedef struct {
    const char *sql;
    void (*take)(RfLedgerEntry *entry, sqlite3_stmt *row);
    int format;     /* since which the table exists */
    bool is_listed; /* read for lists too */
} Part;

static const Part parts[] = {
    {"SELECT role, path, sha256 FROM input WHERE entry = ? ORDER BY rowid", take_input, 1, true},
    {"SELECT part, key, value, is_default FROM setting WHERE entry = ? AND part = 'notes' ORDER BY rowid",
     take_setting, 1, true},
    {"SELECT name, value, sigma FROM figure WHERE entry = ? ORDER BY rowid", take_figure, 2, true},
    {"SELECT part, key, value, is_default FROM setting WHERE entry = ? AND part <> 'notes' ORDER BY rowid",
     take_setting, 1, false},
    {"SELECT kind, text FROM remark WHERE entry = ? ORDER BY rowid", take_remark, 2, false},
};

/* One part of each entry: one statement serves them all. */
static bool fill(RfLedger *ledger, const GPtrArray *entries, const Part *part, GError **error)
{
    if (ledger->format < part->format) return true;
    sqlite3_stmt *query = prepare(ledger, part->sql, error);
    bool is_well = query != NULL;
    for (guint i = 0; is_well && i < entries->len; i++) {
        RfLedgerEntry *entry = g_ptr_array_index(entries, i);
        sqlite3_bind_int64(query, 1, entry->number);
        int status;
        while ((status = sqlite3_step(query)) == SQLITE_ROW) part->take(entry, query);
        sqlite3_reset(query);
        is_well = status == SQLITE_DONE || fail(ledger, status, error);
    }
    sqlite3_finalize(query);
    return is_well;
}

static bool fill_parts(RfLedger *ledger, const GPtrArray *entries, bool is_list, GError **error)
{
    for (size_t i = 0; i < G_N_ELEMENTS(parts); i++)
        if ((parts[i].is_listed || !is_list) && !fill(ledger, entries, &parts[i], error)) return false;
    return true;
}

static char *list_query(const RfLedgerFilter *filter)
{
    GString *sql =
        g_string_new("SELECT " ENTRY_COLUMNS " FROM entry WHERE (?1 IS NULL OR kind = ?1)"
                     " AND (?2 IS NULL OR measured_on >= ?2)"
                     " AND (?3 IS NULL OR measured_on <= ?3 OR substr(measured_on, 1, length(?3)) = ?3)"
                     " AND (?4 IS NULL OR EXISTS(SELECT 1 FROM input WHERE entry = number AND"
                     " (substr(sha256, 1, length(?4)) = ?4 OR substr(path, -length(?4)) = ?4)))");
    for (int i = 0; filter->with && filter->with[i]; i++)
        g_string_append_printf(
            sql, " AND EXISTS(SELECT 1 FROM setting WHERE entry = number AND key || '=' || value = ?%d)",
            5 + i);
    g_string_append(sql, " ORDER BY measured_on, number");
    return g_string_free(sql, FALSE);
}

GPtrArray *rf_ledger_list(RfLedger *ledger, const RfLedgerFilter *filter, GError **error)
{
    g_autoptr(GPtrArray) entries = g_ptr_array_new_with_free_func((GDestroyNotify)rf_ledger_entry_free);
    if (ledger->format == 0) return g_steal_pointer(&entries);
    g_autofree char *sql = list_query(filter);
    sqlite3_stmt *query = prepare(ledger, sql, error);
    if (!query) return NULL;
    const char *fixed[] = {filter->kind, filter->since, filter->until, filter->input};
    for (int i = 0; i < 4; i++) bind_text(query, i + 1, fixed[i]);
    for (int i = 0; filter->with && filter->with[i]; i++) bind_text(query, 5 + i, filter->with[i]);
    int status;
    while ((status = sqlite3_step(query)) == SQLITE_ROW) g_ptr_array_add(entries, take_entry(query));
    sqlite3_finalize(query);
    if (status != SQLITE_DONE) {
        fail(ledger, status, error);
        return NULL;
    }
    return fill_parts(ledger, entries, true, error) ? g_steal_pointer(&entries) : NULL;
}

RfLedgerEntry *rf_ledger_read(RfLedger *ledger, gint64 number, GError **error)
{
    g_autoptr(GPtrArray) found = g_ptr_array_new_with_free_func((GDestroyNotify)rf_ledger_entry_free);
    sqlite3_stmt *query = ledger->format
                              ? prepare(ledger, "SELECT " ENTRY_COLUMNS " FROM entry WHERE number = ?", error)
                              : NULL;
    if (ledger->format && !query) return NULL;
    int status = SQLITE_DONE;
    if (query) {
        sqlite3_bind_int64(query, 1, number);
        if ((status = sqlite3_step(query)) == SQLITE_ROW) g_ptr_array_add(found, take_entry(query));
        sqlite3_finalize(query);
    }
    if (found->len == 0) {
        if (status != SQLITE_DONE)
            fail(ledger, status, error);
        else
            g_set_error(error, RF_LEDGER_ERROR, RF_LEDGER_ERROR_NUMBER,
                        "ledger %s: no entry %" G_GINT64_FORMAT, ledger->path, number);
        return NULL;
    }
    return fill_parts(ledger, found, false, error) ? g_ptr_array_steal_index(found, 0) : NULL;
}
