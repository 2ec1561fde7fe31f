/* SPDX-License-Identifier: MIT */
/*
 * What must stay true: every file handed out is an entry in state TAKEN until its receipt is settled, and an entry
 * knows which file (number, size, time of change) it stands for, so that another file under the same name is never
 * moved away unread.
 */
#include "daemon/feed/drop_folder.h"

#include <dirent.h>
#include <errno.h>
#include <fcntl.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/inotify.h>
#include <unistd.h>

#include "daemon/buffer.h"
#include "daemon/clock.h"
#include "daemon/feed/fnv.h"
#include "daemon/feed/safe_file.h"

/* Files waiting to settle at one time; the listing is read no further while there are as many. */
enum { SETTLING_LIMIT = 2 * DROP_FILES_A_SCAN, NAMED_RESERVE = 1024 };

enum entry_state {
    ENTRY_SETTLING,
    ENTRY_TAKEN, /* handed out; its receipt is not settled yet */
    ENTRY_LEFT   /* stays where it is: refused, or not stored */
};

struct entry {
    char *name;
    uint64_t hash;
    enum entry_state state;
    bool was_renamed_in;
    bool has_identity;
    ino_t number;
    off_t size;
    struct timespec changed, status_changed;
    int64_t unchanged_since_ms;
    uint64_t pass; /* the last listing it was seen in */
};

struct drop_folder {
    struct drop_rules rules;
    char *path, *done_path, *bad_path;
    int fd, done_fd, bad_fd, watch_fd;
    DIR *listing;
    bool is_listing; /* within a pass over the listing, which may take several scans */
    uint64_t pass;
    bool is_astray; /* a move failed: done/ or bad/ may be gone */
    struct entry *entries;
    size_t entry_count, entry_capacity;
    /* one scan */
    int64_t machine_now_ms, scan_began_ms;
    size_t next_entry, handed_out;
    bool is_cut_short; /* out of files or time: there may be more */
};

/* --- what is remembered --- */

static struct entry *entry_find(struct drop_folder *folder, const char *name)
{
    uint64_t hash = fnv_add(FNV_START, name, strlen(name));
    for (size_t i = 0; i < folder->entry_count; i++)
        if (folder->entries[i].hash == hash && strcmp(folder->entries[i].name, name) == 0)
            return &folder->entries[i];
    return NULL;
}

static struct entry *entry_add(struct drop_folder *folder, const char *name)
{
    if (buffer_grow((void *)&folder->entries, &folder->entry_capacity, folder->entry_count,
                    sizeof *folder->entries) != FW_OK)
        return NULL;
    char *copy = strdup(name);
    if (copy == NULL)
        return NULL;
    struct entry *entry = &folder->entries[folder->entry_count++];
    *entry = (struct entry){.name = copy,
                            .hash = fnv_add(FNV_START, name, strlen(name)),
                            .state = ENTRY_SETTLING,
                            .unchanged_since_ms = folder->machine_now_ms,
                            .pass = folder->pass};
    return entry;
}

static void entry_remove(struct drop_folder *folder, struct entry *entry)
{
    free(entry->name);
    *entry = folder->entries[--folder->entry_count];
}

static size_t settling_count(const struct drop_folder *folder)
{
    size_t count = 0;
    for (size_t i = 0; i < folder->entry_count; i++)
        count += folder->entries[i].state == ENTRY_SETTLING;
    return count;
}

static bool is_same_moment(const struct timespec *one, const struct timespec *other)
{
    return one->tv_sec == other->tv_sec && one->tv_nsec == other->tv_nsec;
}

static bool is_same_file(const struct entry *entry, const struct stat *about)
{
    return entry->has_identity && entry->number == about->st_ino && entry->size == about->st_size &&
           is_same_moment(&entry->changed, &about->st_mtim);
}

/* Its rights may have been put right meanwhile, which shows in the time of its status; a folder changes with what is
 * in it. */
static bool is_left_as_it_was(const struct entry *entry, const struct stat *about)
{
    if (S_ISDIR(about->st_mode))
        return entry->has_identity && entry->number == about->st_ino;
    return is_same_file(entry, about) && is_same_moment(&entry->status_changed, &about->st_ctim);
}

static void entry_identify(struct entry *entry, const struct stat *about)
{
    entry->has_identity = true;
    entry->number = about->st_ino;
    entry->size = about->st_size;
    entry->changed = about->st_mtim;
    entry->status_changed = about->st_ctim;
}

static bool ends_in(const char *name, const char *ending)
{
    size_t length = strlen(name), ending_length = strlen(ending);
    return length >= ending_length && strcmp(name + length - ending_length, ending) == 0;
}

static bool is_for_us(const struct drop_folder *folder, const char *name)
{
    if (name[0] == '.' || ends_in(name, ".tmp") || ends_in(name, ".part"))
        return false;
    if (folder->rules.apart != NULL && strcmp(name, folder->rules.apart) == 0)
        return false;
    return folder->rules.suffix == NULL || ends_in(name, folder->rules.suffix);
}

static bool is_named_like_a_file(const struct drop_folder *folder, const char *name)
{
    return folder->rules.suffix != NULL || ends_in(name, ".csv");
}

/* --- opening --- */

static char *join_path(const char *folder, const char *name)
{
    char *path;
    return asprintf(&path, "%s/%s", folder, name) < 0 ? NULL : path;
}

static enum fw_status open_one(const char *path, int *fd_out, struct fw_error *error)
{
    enum fw_status status = safe_file_make_path(path, error);
    if (status != FW_OK)
        return status;
    int fd = open(path, O_RDONLY | O_DIRECTORY | O_CLOEXEC);
    if (fd < 0)
        return fw_error_set(error, FW_IO, "%s: cannot be opened: %s", path, strerror(errno));
    *fd_out = fd;
    return FW_OK;
}

static void shut(int *fd)
{
    if (*fd >= 0)
        close(*fd);
    *fd = -1;
}

static void let_go(struct drop_folder *folder)
{
    if (folder->listing != NULL)
        closedir(folder->listing);
    folder->listing = NULL;
    folder->is_listing = false;
    shut(&folder->fd);
    shut(&folder->done_fd);
    shut(&folder->bad_fd);
}

static enum fw_status open_all(struct drop_folder *folder, struct fw_error *error)
{
    enum fw_status status = open_one(folder->path, &folder->fd, error);
    if (status == FW_OK && folder->rules.keeps_done)
        status = open_one(folder->done_path, &folder->done_fd, error);
    if (status == FW_OK)
        status = open_one(folder->bad_path, &folder->bad_fd, error);
    if (status != FW_OK)
        return status;
    int listing_fd = openat(folder->fd, ".", O_RDONLY | O_DIRECTORY | O_CLOEXEC);
    folder->listing = listing_fd >= 0 ? fdopendir(listing_fd) : NULL;
    if (folder->listing == NULL) {
        status = fw_error_set(error, errno == ENOMEM ? FW_NO_MEMORY : FW_IO, "%s: cannot be listed: %s", folder->path,
                              strerror(errno));
        shut(&listing_fd);
        return status;
    }
    /* a hint only: where there is no inotify, or no more watches, the rescans find everything */
    if (folder->watch_fd >= 0)
        inotify_add_watch(folder->watch_fd, folder->path, IN_MOVED_TO | IN_CLOSE_WRITE | IN_MODIFY | IN_ONLYDIR);
    return FW_OK;
}

enum fw_status drop_folder_open(const char *path, const struct drop_rules *rules, struct drop_folder **folder_out,
                                struct fw_error *error)
{
    struct drop_folder *folder = calloc(1, sizeof *folder);
    if (folder == NULL)
        return fw_error_set(error, FW_NO_MEMORY, "%s: out of memory", path);
    *folder = (struct drop_folder){.rules = *rules, .fd = -1, .done_fd = -1, .bad_fd = -1};
    folder->path = strdup(path);
    folder->done_path = join_path(path, "done");
    folder->bad_path = join_path(path, "bad");
    folder->watch_fd = inotify_init1(IN_NONBLOCK | IN_CLOEXEC);
    enum fw_status status;
    if (folder->path == NULL || folder->done_path == NULL || folder->bad_path == NULL)
        status = fw_error_set(error, FW_NO_MEMORY, "%s: out of memory", path);
    else
        status = open_all(folder, error);
    if (status == FW_OK)
        *folder_out = folder;
    else
        drop_folder_close(folder);
    return status;
}

void drop_folder_close(struct drop_folder *folder)
{
    if (folder == NULL)
        return;
    let_go(folder);
    shut(&folder->watch_fd);
    for (size_t i = 0; i < folder->entry_count; i++)
        free(folder->entries[i].name);
    free(folder->entries);
    free(folder->path);
    free(folder->done_path);
    free(folder->bad_path);
    free(folder);
}

int drop_folder_watch_fd(const struct drop_folder *folder)
{
    return folder->watch_fd;
}

int drop_folder_fd(const struct drop_folder *folder)
{
    return folder->fd;
}

/* --- scanning --- */

/* A folder that was removed, or put in another's place (a mount), is opened anew, and so are done/ and bad/ when a
 * move failed. */
static enum fw_status stay_with_the_path(struct drop_folder *folder, struct fw_error *error)
{
    struct stat held, named;
    if (folder->listing != NULL && !folder->is_astray && fstat(folder->fd, &held) == 0 &&
        stat(folder->path, &named) == 0 && held.st_ino == named.st_ino && held.st_dev == named.st_dev)
        return FW_OK;
    let_go(folder);
    folder->is_astray = false;
    enum fw_status status = open_all(folder, error);
    if (status != FW_OK)
        let_go(folder);
    return status;
}

static void heed_event(struct drop_folder *folder, const struct inotify_event *event)
{
    bool is_rename = (event->mask & IN_MOVED_TO) != 0 && (event->mask & IN_ISDIR) == 0;
    if (!is_rename || event->len == 0 || !is_for_us(folder, event->name))
        return;
    struct entry *entry = entry_find(folder, event->name);
    if (entry == NULL && folder->entry_count < DROP_REMEMBERED + NAMED_RESERVE)
        entry = entry_add(folder, event->name);
    if (entry == NULL || entry->state == ENTRY_TAKEN)
        return; /* the listing will find it; a taken one is looked at when it is settled */
    struct stat about;
    bool is_there = folder->fd >= 0 && fstatat(folder->fd, event->name, &about, AT_SYMLINK_NOFOLLOW) == 0;
    if (entry->state == ENTRY_LEFT && is_there && is_left_as_it_was(entry, &about))
        return; /* rewritten by ourselves */
    entry->state = ENTRY_SETTLING;
    entry->was_renamed_in = true;
}

static void heed_events(struct drop_folder *folder)
{
    _Alignas(struct inotify_event) char bytes[16 * (sizeof(struct inotify_event) + NAME_MAX + 1)];
    ssize_t length;
    while (folder->watch_fd >= 0 && (length = read(folder->watch_fd, bytes, sizeof bytes)) > 0) {
        for (ssize_t at = 0; at < length;) {
            struct inotify_event event;
            memcpy(&event, bytes + at, sizeof event);
            /* the name lies behind the event: read it where it is */
            heed_event(folder, (const struct inotify_event *)(const void *)(bytes + at));
            at += (ssize_t)(sizeof event + event.len);
        }
    }
}

enum fw_status drop_folder_begin(struct drop_folder *folder, int64_t machine_now_ms, struct fw_error *error)
{
    folder->machine_now_ms = machine_now_ms;
    folder->scan_began_ms = clock_machine_ms();
    folder->next_entry = folder->handed_out = 0;
    folder->is_cut_short = false;
    enum fw_status status = stay_with_the_path(folder, error);
    if (status != FW_OK)
        return status;
    heed_events(folder);
    if (!folder->is_listing && folder->listing != NULL) {
        rewinddir(folder->listing);
        folder->is_listing = true;
        folder->pass++;
    }
    return FW_OK;
}

static bool is_due(const struct drop_folder *folder, const struct entry *entry)
{
    return entry->was_renamed_in || ends_in(entry->name, ".ready") ||
           folder->machine_now_ms - entry->unchanged_since_ms >= folder->rules.settle_ms;
}

/* Reads the file whole. FW_NOTHING_NEW: it was written to meanwhile. */
static enum fw_status read_whole(int fd, const struct stat *before, char **bytes_out, size_t *length_out,
                                 struct fw_error *error)
{
    size_t length = 0, size = (size_t)before->st_size;
    char *bytes = malloc(size + 1);
    if (bytes == NULL)
        return fw_error_set(error, FW_NO_MEMORY, "out of memory for %zu bytes", size);
    enum fw_status status = FW_OK;
    while (length < size) {
        ssize_t count = read(fd, bytes + length, size - length);
        if (count < 0 && errno == EINTR)
            continue;
        if (count < 0)
            status = fw_error_set(error, FW_IO, "cannot be read: %s", strerror(errno));
        if (count <= 0)
            break;
        length += (size_t)count;
    }
    struct stat after;
    if (status == FW_OK && (length < size || fstat(fd, &after) != 0 || after.st_size != before->st_size ||
                            !is_same_moment(&after.st_mtim, &before->st_mtim)))
        status = FW_NOTHING_NEW;
    if (status != FW_OK) {
        free(bytes);
        return status;
    }
    bytes[length] = '\0';
    *bytes_out = bytes;
    *length_out = length;
    return FW_OK;
}

static enum fw_status refuse(struct entry *entry, struct drop_file *file, bool goes_to_bad, const char *why)
{
    snprintf(file->refusal, sizeof file->refusal, "%.255s", why);
    file->goes_to_bad = goes_to_bad;
    entry->state = goes_to_bad ? ENTRY_TAKEN : ENTRY_LEFT;
    return FW_OK;
}

static enum fw_status take(struct drop_folder *folder, struct entry *entry, struct drop_file *file,
                           struct fw_error *error)
{
    struct fw_error why = {0};
    struct stat about;
    int fd = -1;
    enum fw_status status = safe_file_open(folder->fd, entry->name, &fd, &about, &why);
    if (status == FW_UNAVAILABLE)
        return FW_NOTHING_NEW;
    if (status != FW_OK)
        return refuse(entry, file, status == FW_BAD_INPUT, why.text);
    entry_identify(entry, &about);
    if ((uint64_t)about.st_size > folder->rules.length_limit) {
        char text[128];
        snprintf(text, sizeof text, "has %lld bytes; expected at most %zu", (long long)about.st_size,
                 folder->rules.length_limit);
        status = refuse(entry, file, true, text);
    } else {
        status = read_whole(fd, &about, &file->bytes, &file->length, &why);
        if (status == FW_OK)
            entry->state = ENTRY_TAKEN;
        else if (status == FW_IO)
            status = refuse(entry, file, false, why.text);
        else if (status == FW_NO_MEMORY)
            status = fw_error_set(error, status, "%s/%s: %s", folder->path, entry->name, why.text);
    }
    if (status == FW_NOTHING_NEW) { /* still being written, rename or not */
        entry->was_renamed_in = false;
        entry->unchanged_since_ms = folder->machine_now_ms;
    }
    close(fd);
    return status;
}

/* Folders are passed over; one that is named like a file is said once. */
static enum fw_status pass_over_folder(struct drop_folder *folder, struct entry *entry, const struct stat *about,
                                       struct drop_file *file)
{
    if (!is_named_like_a_file(folder, entry->name)) {
        entry_remove(folder, entry);
        return FW_NOTHING_NEW;
    }
    entry_identify(entry, about);
    return refuse(entry, file, false, "is a folder; expected a regular file");
}

/* Looks at one remembered name. FW_OK: *file is to be handed out. FW_NOTHING_NEW: not now (the entry may be gone). */
static enum fw_status look_at(struct drop_folder *folder, struct entry *entry, struct drop_file *file,
                              struct fw_error *error)
{
    struct stat about;
    if (fstatat(folder->fd, entry->name, &about, AT_SYMLINK_NOFOLLOW) != 0) {
        if (entry->state == ENTRY_SETTLING)
            entry_remove(folder, entry);
        return FW_NOTHING_NEW;
    }
    bool is_same = is_same_file(entry, &about);
    if (entry->state == ENTRY_TAKEN || (entry->state == ENTRY_LEFT && is_left_as_it_was(entry, &about)))
        return FW_NOTHING_NEW;
    entry->state = ENTRY_SETTLING;
    if (!is_same) {
        entry_identify(entry, &about);
        entry->unchanged_since_ms = folder->machine_now_ms;
    }
    snprintf(file->name, sizeof file->name, "%s", entry->name);
    if (S_ISDIR(about.st_mode))
        return pass_over_folder(folder, entry, &about, file);
    if (!S_ISREG(about.st_mode)) {
        char why[80];
        snprintf(why, sizeof why, "is %s; expected a regular file", safe_file_kind(about.st_mode));
        return refuse(entry, file, true, why);
    }
    return is_due(folder, entry) ? take(folder, entry, file, error) : FW_NOTHING_NEW;
}

/* What was left where it was and is no longer listed is forgotten. */
static void end_pass(struct drop_folder *folder)
{
    folder->is_listing = false;
    for (size_t i = folder->entry_count; i > 0; i--) {
        struct entry *entry = &folder->entries[i - 1];
        if (entry->state == ENTRY_LEFT && entry->pass != folder->pass)
            entry_remove(folder, entry);
    }
}

/* One name of the listing. FW_OK: hand *file out. FW_NOTHING_NEW: go on. FW_UNAVAILABLE: the listing ends here, for
 * this scan. */
static enum fw_status list_one(struct drop_folder *folder, struct drop_file *file, struct fw_error *error)
{
    if (!folder->is_listing || folder->entry_count >= DROP_REMEMBERED || settling_count(folder) >= SETTLING_LIMIT)
        return FW_UNAVAILABLE;
    errno = 0;
    const struct dirent *listed = readdir(folder->listing);
    if (listed == NULL && errno != 0)
        return fw_error_set(error, FW_IO, "%s: cannot be listed: %s", folder->path, strerror(errno));
    if (listed == NULL) {
        end_pass(folder);
        return FW_UNAVAILABLE;
    }
    if (!is_for_us(folder, listed->d_name) ||
        (listed->d_type == DT_DIR && !is_named_like_a_file(folder, listed->d_name)))
        return FW_NOTHING_NEW;
    struct entry *entry = entry_find(folder, listed->d_name);
    if (entry != NULL) {
        entry->pass = folder->pass;
        return entry->state == ENTRY_LEFT ? look_at(folder, entry, file, error) : FW_NOTHING_NEW;
    }
    entry = entry_add(folder, listed->d_name);
    if (entry == NULL) {
        folder->is_listing = false; /* the next scan lists from the start: this name is not lost */
        return fw_error_set(error, FW_NO_MEMORY, "%s: out of memory", folder->path);
    }
    return look_at(folder, entry, file, error);
}

enum fw_status drop_folder_next(struct drop_folder *folder, struct drop_file *file_out, struct fw_error *error)
{
    struct drop_file file = {0};
    enum fw_status status = FW_NOTHING_NEW;
    while (status == FW_NOTHING_NEW) {
        if (folder->handed_out >= DROP_FILES_A_SCAN || clock_machine_ms() - folder->scan_began_ms > DROP_SCAN_MS) {
            folder->is_cut_short = true;
            return FW_NOTHING_NEW;
        }
        if (folder->next_entry < folder->entry_count) {
            struct entry *entry = &folder->entries[folder->next_entry];
            size_t count = folder->entry_count;
            if (entry->state == ENTRY_SETTLING && is_due(folder, entry))
                status = look_at(folder, entry, &file, error);
            folder->next_entry += folder->entry_count == count; /* else another entry has come into its place */
        } else {
            size_t count = folder->entry_count;
            status = list_one(folder, &file, error);
            if (folder->entry_count > count)
                folder->next_entry = folder->entry_count; /* the new one has been looked at */
        }
    }
    if (status == FW_OK) {
        folder->handed_out++;
        *file_out = file;
    }
    return status == FW_UNAVAILABLE ? FW_NOTHING_NEW : status;
}

int64_t drop_folder_next_look_ms(const struct drop_folder *folder)
{
    if (folder->is_cut_short)
        return 0;
    int64_t soonest_ms = -1;
    for (size_t i = 0; i < folder->entry_count; i++) {
        const struct entry *entry = &folder->entries[i];
        int64_t left_ms = entry->unchanged_since_ms + folder->rules.settle_ms - folder->machine_now_ms;
        if (entry->state == ENTRY_SETTLING && (soonest_ms < 0 || left_ms < soonest_ms))
            soonest_ms = left_ms < 0 ? 0 : left_ms;
    }
    return soonest_ms;
}

bool drop_folder_is_full(const struct drop_folder *folder)
{
    return folder->entry_count >= DROP_REMEMBERED;
}

void drop_folder_put_back(struct drop_folder *folder, const char *name)
{
    struct entry *entry = entry_find(folder, name);
    if (entry != NULL)
        entry->state = ENTRY_SETTLING;
}

/* --- settling --- */

enum fw_status drop_folder_add_receipt(const struct drop_folder *folder, const char *name, bool is_bad,
                                       const char *reason, void *owner, struct news *news)
{
    bool moves = is_bad || folder->rules.keeps_done;
    char *from = join_path(folder->path, name);
    char *to = moves ? join_path(is_bad ? folder->bad_path : folder->done_path, name) : NULL;
    enum fw_status status =
        from != NULL && (to != NULL || !moves) ? news_add_receipt(news, from, to, reason, owner, 0) : FW_NO_MEMORY;
    free(from);
    free(to);
    return status;
}

static bool rename_if_free(int from_fd, const char *name, int to_fd, const char *as)
{
    if (renameat2(from_fd, name, to_fd, as, RENAME_NOREPLACE) == 0)
        return true;
    if (errno != EINVAL && errno != ENOSYS)
        return false;
    /* a filesystem that does not know the flag: nobody else names files in done/ and bad/ */
    struct stat about;
    if (fstatat(to_fd, as, &about, AT_SYMLINK_NOFOLLOW) == 0) {
        errno = EEXIST;
        return false;
    }
    return renameat(from_fd, name, to_fd, as) == 0;
}

static bool is_number_taken(int folder_fd, const char *name, unsigned number, char as[NAME_MAX + 1])
{
    struct stat about;
    snprintf(as, NAME_MAX + 1, "%.240s.%u", name, number);
    return fstatat(folder_fd, as, &about, AT_SYMLINK_NOFOLLOW) == 0;
}

/*
 * Moves a file under its own name, or NAME.1, NAME.2 ... where that is taken. The free number is sought by doubling
 * and halving: a logger that always writes the same name leaves thousands.
 */
static bool move_to_free_name(int from_fd, const char *name, int to_fd, char as[NAME_MAX + 1])
{
    snprintf(as, NAME_MAX + 1, "%s", name);
    if (rename_if_free(from_fd, name, to_fd, as))
        return true;
    if (errno != EEXIST)
        return false;
    unsigned taken = 0, number = 1;
    while (number < 1u << 30 && is_number_taken(to_fd, name, number, as)) {
        taken = number;
        number *= 2;
    }
    while (number - taken > 1) {
        unsigned middle = taken + (number - taken) / 2;
        *(is_number_taken(to_fd, name, middle, as) ? &taken : &number) = middle;
    }
    snprintf(as, NAME_MAX + 1, "%.240s.%u", name, number);
    return rename_if_free(from_fd, name, to_fd, as);
}

static enum fw_status write_reason(int folder_fd, const char *as, const char *reason, struct fw_error *error)
{
    char name[NAME_MAX + 1];
    snprintf(name, sizeof name, "%.240s.reason", as);
    return safe_file_write(folder_fd, name, reason, strlen(reason), error);
}

static enum fw_status move_away(struct drop_folder *folder, struct entry *entry, const struct news_receipt *receipt,
                                struct fw_error *error)
{
    bool is_bad = strncmp(receipt->to, folder->bad_path, strlen(folder->bad_path)) == 0;
    int to_fd = is_bad ? folder->bad_fd : folder->done_fd;
    char as[NAME_MAX + 1];
    struct stat moved;
    if (!move_to_free_name(folder->fd, entry->name, to_fd, as)) {
        int why = errno;
        if (fstatat(folder->fd, entry->name, &moved, AT_SYMLINK_NOFOLLOW) != 0 && errno == ENOENT) {
            entry_remove(folder, entry); /* somebody took it away; its readings are stored */
            return FW_OK;
        }
        entry->state = ENTRY_LEFT;
        folder->is_astray = true;
        return fw_error_set(error, FW_IO, "%s: cannot be moved to %s: %s", receipt->from, receipt->to, strerror(why));
    }
    enum fw_status status = FW_OK;
    if (fstatat(to_fd, as, &moved, AT_SYMLINK_NOFOLLOW) == 0 && !is_same_file(entry, &moved)) {
        /* not the one that was read: back with it */
        char again[NAME_MAX + 1];
        if (!move_to_free_name(to_fd, as, folder->fd, again))
            status =
                fw_error_set(error, FW_IO, "%s: came after the file of that name was read, and lies unread in %s: %s",
                             receipt->from, receipt->to, strerror(errno));
    } else if (receipt->reason != NULL) {
        status = write_reason(to_fd, as, receipt->reason, error);
    }
    entry_remove(folder, entry);
    return status;
}

enum fw_status drop_folder_rewrite(struct drop_folder *folder, const char *name, const char *bytes, size_t length,
                                   struct fw_error *error)
{
    struct stat about;
    struct entry *entry = entry_find(folder, name);
    if (entry == NULL || folder->fd < 0)
        return fw_error_set(error, FW_IO, "%s/%s: is not there any more", folder->path, name);
    if (fstatat(folder->fd, name, &about, AT_SYMLINK_NOFOLLOW) != 0 || !is_same_file(entry, &about))
        return FW_OK; /* another one has come under its name, and will be handed out */
    enum fw_status status = safe_file_write(folder->fd, name, bytes, length, error);
    if (status == FW_OK && fstatat(folder->fd, name, &about, AT_SYMLINK_NOFOLLOW) == 0)
        entry_identify(entry, &about);
    return status == FW_OK ? FW_OK : fw_error_prefix(error, status, "%s", folder->path);
}

enum fw_status drop_folder_settle(struct drop_folder *folder, const struct news_receipt *receipt, bool was_stored,
                                  struct fw_error *error)
{
    const char *slash = strrchr(receipt->from, '/');
    struct entry *entry = entry_find(folder, slash != NULL ? slash + 1 : receipt->from);
    if (entry == NULL || entry->state != ENTRY_TAKEN)
        return FW_OK; /* settled already */
    if (!was_stored || folder->fd < 0) {
        entry->state = ENTRY_LEFT;
        return FW_OK;
    }
    if (receipt->to != NULL)
        return move_away(folder, entry, receipt, error);
    enum fw_status status = FW_OK;
    if (unlinkat(folder->fd, entry->name, 0) != 0 && errno != ENOENT) {
        entry->state = ENTRY_LEFT;
        return fw_error_set(error, FW_IO, "%s: cannot be removed: %s", receipt->from, strerror(errno));
    }
    entry_remove(folder, entry);
    return status;
}
