/* SPDX-License-Identifier: MIT */
#include "daemon/delta.h"

#include <stdlib.h>

struct picture *delta_take_picture(struct delta *delta)
{
    struct picture *picture = delta->next;
    delta->next = NULL;
    return picture;
}

void delta_clear(struct delta *delta)
{
    picture_destroy(delta->next);
    free(delta->readings);
    free(delta->judgements);
    free(delta->words);
    free(delta->decisions);
    text_clear(&delta->ledger.payload);
    *delta = (struct delta){0};
}
