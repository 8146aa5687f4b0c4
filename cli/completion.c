#include "cli/completion.h"

#include <glib.h>
#include <string.h>

#include "cli/command.h"

/* The fixed part. Readline splits words at = too (COMP_WORDBREAKS), so that --out=DIR comes as three. */
static const char frame_head[] =
    "# bash completion for risefall, made from the program's own tables: cli/completion.c\n"
    "\n"
    "_risefall_files() # PATTERN...: files that match, and folders on the way; any file where there are "
    "none\n"
    "{\n"
    "    local pattern\n"
    "    local -a found=()\n"
    "    for pattern; do\n"
    "        mapfile -t -O \"${#found[@]}\" found < <(compgen -f -X \"!$pattern\" -- \"$word\")\n"
    "    done\n"
    "    [ \"$#\" -eq 0 ] || mapfile -t -O \"${#found[@]}\" found < <(compgen -d -- \"$word\")\n"
    "    if [ \"${#found[@]}\" -eq 0 ]; then\n"
    "        mapfile -t found < <(compgen -f -- \"$word\")\n"
    "    fi\n"
    "    compopt -o filenames 2>/dev/null\n"
    "    COMPREPLY=(\"${found[@]}\")\n"
    "}\n"
    "\n"
    "_risefall_words()\n"
    "{\n"
    "    mapfile -t COMPREPLY < <(compgen -W \"$*\" -- \"$word\")\n"
    "}\n"
    "\n"
    "_risefall_folders()\n"
    "{\n"
    "    compopt -o filenames 2>/dev/null\n"
    "    mapfile -t COMPREPLY < <(compgen -d -- \"$word\")\n"
    "}\n"
    "\n"
    "_risefall()\n"
    "{\n"
    "    local word=${COMP_WORDS[COMP_CWORD]} before=${COMP_WORDS[COMP_CWORD-1]} verb=${COMP_WORDS[1]}\n"
    "    COMPREPLY=()\n"
    "    if [ \"$word\" = = ]; then\n"
    "        word=\n"
    "    elif [ \"$before\" = = ]; then\n"
    "        before=${COMP_WORDS[COMP_CWORD-2]}\n"
    "    fi\n"
    "    if [ \"$COMP_CWORD\" -eq 1 ]; then\n";

static const char frame_tail[] = "    esac\n"
                                 "}\n"
                                 "\n"
                                 "complete -F _risefall risefall\n";

static void append_verbs(GString *out)
{
    for (const RfCommand *const *command = rf_commands; *command; command++)
        g_string_append_printf(out, "%s ", (*command)->verb);
}

/* What completes a value of this name: DIR or what ends with it, FILE, SHEET, X.csv, or words with a bar between. Nothing for quantities. */
static char *action_for(const char *name)
{
    if (g_str_has_suffix(name, "DIR")) return g_strdup("_risefall_folders");
    if (strcmp(name, "SHEET") == 0) return g_strdup("_risefall_files '*.ini'");
    if (strcmp(name, "SCENE") == 0) return g_strdup("_risefall_files '*.scene'");
    const char *suffix = strrchr(name, '.');
    if (suffix && g_ascii_islower(suffix[1])) return g_strdup_printf("_risefall_files '*%s'", suffix);
    if (!g_ascii_islower(*name)) return g_strdup("_risefall_files");
    g_auto(GStrv) words = g_strsplit(name, "|", -1);
    g_autofree char *list = g_strjoinv(" ", words);
    return g_strdup_printf("_risefall_words %s", list);
}

static bool is_file_or_words(const GOptionEntry *option)
{
    return option->arg == G_OPTION_ARG_FILENAME || option->arg == G_OPTION_ARG_FILENAME_ARRAY ||
           (option->arg_description && strchr(option->arg_description, '|'));
}

static void append_value(GString *out, const char *verb, const GOptionEntry *option)
{
    g_string_append_printf(out, "    %s:--%s", verb, option->long_name);
    if (option->short_name) g_string_append_printf(out, " | %s:-%c", verb, option->short_name);
    g_autofree char *action = is_file_or_words(option) ? action_for(option->arg_description) : g_strdup(":");
    g_string_append_printf(out, ") %s ;;\n", action);
}

/* The name of the first argument: "SHEET" of "SHEET --paths FILE --out DIR", "DIR" of "DIR... --out DIR". */
static char *argument_name(const RfCommand *command)
{
    char *name = g_strndup(command->arguments, strcspn(command->arguments, " ["));
    if (g_str_has_suffix(name, "...")) name[strlen(name) - 3] = '\0';
    return name;
}

static void append_command(GString *out, const RfCommand *command)
{
    g_autofree GOptionEntry *options = rf_command_options(command);
    g_string_append_printf(out, "    %s:*)\n        case $word in\n        -*) _risefall_words --help",
                           command->verb);
    for (const GOptionEntry *option = options; option->long_name; option++)
        g_string_append_printf(out, " --%s", option->long_name);
    g_autofree char *name = argument_name(command), *action = action_for(name);
    g_string_append_printf(out, " ;;\n        *) %s ;;\n        esac\n        ;;\n", action);
}

char *rf_completion_bash(void)
{
    GString *out = g_string_new(frame_head);
    g_string_append(out, "        _risefall_words ");
    append_verbs(out);
    g_string_append(out, "help --help --version\n        return\n    fi\n    case $verb:$before in\n    "
                         "help:help) _risefall_words ");
    append_verbs(out);
    g_string_append(out, "sheet ;;\n");
    for (const RfCommand *const *command = rf_commands; *command; command++) {
        g_autofree GOptionEntry *options = rf_command_options(*command);
        for (const GOptionEntry *option = options; option->long_name; option++)
            if (option->arg != G_OPTION_ARG_NONE) append_value(out, (*command)->verb, option);
    }
    for (const RfCommand *const *command = rf_commands; *command; command++) append_command(out, *command);
    g_string_append(out, frame_tail);
    return g_string_free(out, FALSE);
}
