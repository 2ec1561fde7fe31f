/* SPDX-License-Identifier: MIT */
#include "config/demo/play_config.h"

#include <errno.h>
#include <limits.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <unistd.h>

char *play_config_read(const char *path)
{
    FILE *stream = fopen(path, "r");
    char *text = NULL;
    size_t size = 0;
    ssize_t length = -1;
    if (stream != NULL)
        length = getdelim(&text, &size, '\0', stream);
    if (length < 0) {
        fprintf(stderr, "play: %s: %s\n", path,
                stream == NULL || ferror(stream) != 0 ? strerror(errno) : "it is empty");
        free(text);
        text = NULL;
    }
    if (stream != NULL)
        fclose(stream);
    return text;
}

struct place {
    const char *was;
    char becomes[PATH_MAX + 16];
};
enum { PLACE_COUNT = 3 };

static bool is_there_once(const char *text, const char *what)
{
    const char *first = strstr(text, what);
    if (first != NULL && strstr(first + 1, what) == NULL)
        return true;
    fprintf(stderr, "play: the configuration must hold %s exactly once, for the player to fill in\n", what);
    return false;
}

static bool fill_in(const struct play_config_places *places, struct place filled_out[PLACE_COUNT])
{
    char folder[PATH_MAX];
    if (getcwd(folder, sizeof folder) == NULL || strpbrk(folder, "\"\\") != NULL ||
        strpbrk(places->hook, "\"\\") != NULL) {
        fputs("play: a folder's name that holds a quote or a backslash cannot be written into the configuration\n",
              stderr);
        return false;
    }
    filled_out[0].was = "\"http://127.0.0.1:8469/";
    snprintf(filled_out[0].becomes, sizeof filled_out[0].becomes, "\"http://127.0.0.1:%u/", places->port);
    filled_out[1].was = "\"./page-hook\"";
    snprintf(filled_out[1].becomes, sizeof filled_out[1].becomes, "\"%s\"", places->hook);
    filled_out[2].was = "\"messages.jsonl\"";
    int length =
        snprintf(filled_out[2].becomes, sizeof filled_out[2].becomes, "\"%s/%s\"", folder, places->told_file);
    return length < (int)sizeof filled_out[2].becomes;
}

static const struct place *place_at(const char *text, const struct place places[PLACE_COUNT])
{
    for (size_t i = 0; i < PLACE_COUNT; i++)
        if (strncmp(text, places[i].was, strlen(places[i].was)) == 0)
            return &places[i];
    return NULL;
}

bool play_config_write(const char *text, const struct play_config_places *places, const char *path)
{
    struct place filled[PLACE_COUNT];
    if (!fill_in(places, filled))
        return false;
    for (size_t i = 0; i < PLACE_COUNT; i++)
        if (!is_there_once(text, filled[i].was))
            return false;
    FILE *stream = fopen(path, "w");
    if (stream == NULL) {
        fprintf(stderr, "play: %s: %s\n", path, strerror(errno));
        return false;
    }
    while (*text != '\0') {
        const struct place *place = place_at(text, filled);
        if (place != NULL) {
            fputs(place->becomes, stream);
            text += strlen(place->was);
        } else {
            fputc(*text++, stream);
        }
    }
    bool is_whole = ferror(stream) == 0;
    is_whole &= fclose(stream) == 0;
    if (!is_whole)
        fprintf(stderr, "play: %s: %s\n", path, strerror(errno));
    return is_whole;
}
