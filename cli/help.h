/* What `risefall --help` and `risefall help TOPIC` show. Each --help fits a page of 24 lines. */
#pragma once

#include <stdio.h>

#include "cli/command.h"

void rf_help_overview(FILE *to);

/* `risefall VERB --help` on stdout: options and an example. */
void rf_help_command(const RfCommand *command);

/* `topic`: NULL for the overview, a command's verb, or "sheet"; shown with a pager on a terminal that is too short.
 * More than one topic, or one that there isn't, is a usage error. */
RfExit rf_help_topic(const char *topic, int n_topics);

/* "no command 'runn'; did you mean 'run'?" on stderr. */
RfExit rf_help_no_such(const char *kind, const char *word);
