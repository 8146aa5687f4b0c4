/* Run by the build: a page of the manual, or the completion, on stdout. `write_manual page NAME`, `write_manual bash`. */
#include <stdio.h>
#include <string.h>

#include "cli/completion.h"
#include "cli/manual.h"

static RfManual *page_named(const char *name)
{
    if (strcmp(name, "risefall") == 0) return rf_manual_overview();
    if (strcmp(name, "sheet") == 0) return rf_manual_sheet();
    const RfCommand *command = rf_command_find(name);
    return command ? rf_manual_command(command) : NULL;
}

static char *text_of(int argc, char **argv)
{
    if (argc == 2 && strcmp(argv[1], "bash") == 0) return rf_completion_bash();
    if (argc != 3 || strcmp(argv[1], "page") != 0) return NULL;
    g_autoptr(RfManual) page = page_named(argv[2]);
    return page ? rf_manual_roff(page) : NULL;
}

int main(int argc, char **argv)
{
    g_autofree char *text = text_of(argc, argv);
    if (!text) {
        fputs("usage: write_manual page NAME | bash\n", stderr);
        return 2;
    }
    return fputs(text, stdout) < 0;
}
