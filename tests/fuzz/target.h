/* A fuzz target is one file that defines what to do with any bytes at all. Built with RF_FUZZ_ENGINE it is driven by libFuzzer
 * (tests/fuzz/campaign); built without, by replay.c, which feeds it the inputs kept in corpus/. Whatever the bytes are, a target
 * comes back: no signal, no warning of GLib's, nothing leaked, and whatever was read makes sense. */
#pragma once

#include <glib.h>
#include <stddef.h>
#include <stdint.h>

int LLVMFuzzerTestOneInput(const uint8_t *bytes, size_t size);

/* Before the first input; always 0. */
int LLVMFuzzerInitialize(int *argc, char ***argv);

/* A refusal has to say something, in text that can be printed. Frees it. */
void rf_target_check_words(GError *error);

/* (borrowed) A folder of this process's own, removed when it ends. */
const char *rf_target_folder(void);

/* Puts a file there, over an earlier one of that name. (returns new) its path. */
char *rf_target_file(const char *name, const void *bytes, size_t size);

/* For targets that read several files: the input's parts, separated by form feeds, become files of these names, in this
 * order (ends with NULL); names without a part become no file. */
void rf_target_files(const char *const *names, const uint8_t *bytes, size_t size);
