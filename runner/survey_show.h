/* SPDX-License-Identifier: Apache-2.0 */
#ifndef DRIVETRIAL_SURVEY_SHOW_H
#define DRIVETRIAL_SURVEY_SHOW_H
/* What a survey found, as text for people. Pure but for the text. */
#include "survey_read.h"

/* Links, devices, identities, times, and a row for each channel. */
void survey_show(const struct survey *survey, struct text *out);
/* Only the rows of channels, for --watch. */
void survey_show_values(const struct survey *survey, struct text *out);
/* One line each for what looks wrong: returns how many. */
size_t survey_doubts(const struct survey *survey, struct text *out);
/* What a Modbus exception means here, and what to look at. Static. */
const char *survey_exception_hint(int exception);

#endif
