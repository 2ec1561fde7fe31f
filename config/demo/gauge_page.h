/* SPDX-License-Identifier: MIT */
/*
 * The other agency's web page, as the demonstration plays it: GET /orlin-scar on 127.0.0.1 answers with the newest
 * readings as JSON, {"gauge": "Orlin Scar", "data": [{"t": "2031-02-14T20:15:00Z", "v": 1.60}, ...]}, oldest first,
 * at most GAUGE_PAGE_WINDOW of them. It has an ETag and answers 304 to who has that already. While it is out of
 * reach, connections are closed without a reply.
 *
 * It answers on a thread of its own; every function here may be called beside it.
 */
#ifndef FOREWATER_CONFIG_DEMO_GAUGE_PAGE_H
#define FOREWATER_CONFIG_DEMO_GAUGE_PAGE_H

#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

enum { GAUGE_PAGE_WINDOW = 48 };

struct gauge_page;

struct gauge_page_count {
    size_t whole, unchanged, cut_off; /* replies with readings, 304s, connections closed without a reply */
};

struct gauge_page *gauge_page_open(void); /* NULL: said on stderr */
void gauge_page_close(struct gauge_page *page);
unsigned gauge_page_port(const struct gauge_page *page); /* chosen by the system */

void gauge_page_add(struct gauge_page *page, int64_t observed_utc_s, const char *stage_m);
void gauge_page_set_in_reach(struct gauge_page *page, bool is_in_reach);
struct gauge_page_count gauge_page_counted(struct gauge_page *page);

#endif
