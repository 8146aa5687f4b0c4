/* bash completion from the command tables: commands, options, words that an option takes, files by kind. */
#pragma once

/* A script for /usr/share/bash-completion/completions/risefall, or to be sourced. (returns new) */
char *rf_completion_bash(void);
