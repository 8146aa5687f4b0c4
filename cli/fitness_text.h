/* The verdict on a recording as people and programs read it. Pure. */
#pragma once

#include "cli/fitness.h"
#include "cli/json_text.h"

/* One line a matter, advice below where there is any. (returns new) */
char *rf_fitness_text(const char *path, const RfFitnessFigures *figures, const GArray *lines);

/* Keys are stable, and carry their units; a figure that could not be determined is null. (returns new) */
char *rf_fitness_json(const char *path, const RfFitnessFigures *figures, const GArray *lines);

/* Adds a member "findings" to the open object: one object a line of RfFitnessLine, under its key. */
void rf_fitness_text_findings(JsonBuilder *json, const GArray *lines);
