/* SPDX-License-Identifier: MIT */
/* Section (2) of the bulletin: the crossings by act-by, one line each. */
#ifndef FOREWATER_DAEMON_TELL_BULLETIN_TABLE_H
#define FOREWATER_DAEMON_TELL_BULLETIN_TABLE_H

#include "daemon/tell/bulletin_page.h"
#include "daemon/tell/sentence_view.h"

enum { BULLETIN_TABLE_LEAST = 4 }; /* title, heads, one crossing, how many more */

/* Lines it would like to have: all crossings, or the first six. */
size_t bulletin_table_wish(const struct sentence_view *view);

/* At most line_count lines (BULLETIN_TABLE_LEAST or more). The view's own point is always among them. */
void bulletin_table_add(const struct sentence_view *view, size_t line_count, struct page *page);

#endif
