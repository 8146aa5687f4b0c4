/* Text that may be longer than the screen. */
#pragma once

/* Through $PAGER, or less where there is one, if stdout is a terminal with fewer lines; else straight to stdout. */
void rf_pager_show(const char *text);
