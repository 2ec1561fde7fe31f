/* SPDX-License-Identifier: MIT */
#include "engine/bit_index.h"

static uint64_t segment_of(double value)
{
    uint64_t bits;
    memcpy(&bits, &value, sizeof bits);
    return bits >> BIT_INDEX_SHIFT;
}

static double segment_start(uint64_t segment)
{
    uint64_t bits = segment << BIT_INDEX_SHIFT;
    double value;
    memcpy(&value, &bits, sizeof value);
    return value;
}

void bit_index_init(struct bit_index *index, double first, double last)
{
    uint64_t first_segment = segment_of(first);
    uint64_t last_segment = segment_of(last);
    if (first_segment == 0)
        first_segment = 1; /* a subnormal: as good as 0 */
    index->base = first_segment - 1;
    index->row_count = (size_t)(last_segment - index->base) + 1;
    index->lowest = segment_start(index->base);
    index->highest = segment_start(last_segment);
}

double bit_index_row_start(const struct bit_index *index, size_t row)
{
    return row == 0 ? 0.0 : segment_start(index->base + row);
}
