/* SPDX-License-Identifier: MIT */
#include "daemon/store/store_internal.h"

#include <errno.h>
#include <fcntl.h>
#include <libgen.h>
#include <linux/magic.h>
#include <stdio.h>
#include <string.h>
#include <sys/stat.h>
#include <sys/statvfs.h>
#include <sys/vfs.h>
#include <unistd.h>

#ifndef CIFS_SUPER_MAGIC
#define CIFS_SUPER_MAGIC 0xFF534D42
#endif
#ifndef SMB2_SUPER_MAGIC
#define SMB2_SUPER_MAGIC 0xFE534D42
#endif

enum { HEADER_SIZE = STORE_HEADER_SIZE, VERSION_AT = 60, APPLICATION_AT = 68 }; /* the file format, section 1.3 */

static enum fw_status system_fault(const char *path, const char *what, struct fw_error *error)
{
    return fw_error_set(error, FW_IO, "%s: cannot %s: %s", path, what, strerror(errno));
}

static enum fw_status directory_of(const char *file, char directory[STORE_PATH_SIZE], struct fw_error *error)
{
    char copy[STORE_PATH_SIZE];
    if (strlen(file) + sizeof ".damaged-20310214T221500Z-99-wal" > sizeof copy)
        return fw_error_set(error, FW_BAD_INPUT, "%s: the path of the store is too long", file);
    snprintf(copy, sizeof copy, "%s", file);
    snprintf(directory, STORE_PATH_SIZE, "%s", dirname(copy));
    return FW_OK;
}

static int big_endian_32(const unsigned char *bytes)
{
    return (int)((unsigned)bytes[0] << 24 | (unsigned)bytes[1] << 16 | (unsigned)bytes[2] << 8 | (unsigned)bytes[3]);
}

static enum store_file_kind kind_of_header(const unsigned char header[HEADER_SIZE], int *version_out)
{
    if (memcmp(header, "SQLite format 3", 16) != 0 || big_endian_32(header + APPLICATION_AT) != STORE_APPLICATION_ID)
        return STORE_FILE_STRANGE;
    *version_out = big_endian_32(header + VERSION_AT);
    bool is_known = *version_out >= STORE_OLDEST_VERSION && *version_out <= STORE_VERSION;
    return is_known ? STORE_FILE_OURS : STORE_FILE_OTHER;
}

bool store_file_is_our_header(const unsigned char header[STORE_HEADER_SIZE])
{
    int version = 0;
    return kind_of_header(header, &version) == STORE_FILE_OURS;
}

enum fw_status store_file_inspect(const char *file, enum store_file_kind *kind_out, int *version_out,
                                  struct fw_error *error)
{
    unsigned char header[HEADER_SIZE];
    struct stat found;
    int descriptor = open(file, O_RDONLY | O_CLOEXEC | O_NONBLOCK);
    if (descriptor < 0 && errno == ENOENT) {
        *kind_out = STORE_FILE_MISSING;
        return FW_OK;
    }
    if (descriptor < 0)
        return system_fault(file, "open", error);
    enum fw_status status = FW_OK;
    ssize_t length = 0;
    if (fstat(descriptor, &found) != 0)
        status = system_fault(file, "look at", error);
    else if (!S_ISREG(found.st_mode))
        status = fw_error_set(error, FW_FOREIGN, "%s: is not a regular file", file);
    else if ((length = pread(descriptor, header, sizeof header, 0)) < 0)
        status = system_fault(file, "read", error);
    close(descriptor);
    if (status == FW_OK)
        *kind_out = found.st_size == 0                 ? STORE_FILE_MISSING
                    : length == (ssize_t)sizeof header ? kind_of_header(header, version_out)
                                                       : STORE_FILE_STRANGE;
    return status;
}

enum fw_status store_file_refuse_strange(const char *file, struct fw_error *error)
{
    return fw_error_set(error, FW_FOREIGN, "%s: is not a Forewater store; it was left as it is", file);
}

enum fw_status store_file_refuse_version(const char *file, int version, struct fw_error *error)
{
    return fw_error_set(error, FW_FOREIGN,
                        "%s: is a store of version %d, this program knows version %d; it was left as it is", file,
                        version, STORE_VERSION);
}

enum fw_status store_file_make_room(const char *file, struct fw_error *error)
{
    char directory[STORE_PATH_SIZE];
    enum fw_status status = directory_of(file, directory, error);
    if (status == FW_OK && mkdir(directory, 0750) != 0 && errno != EEXIST)
        status = system_fault(directory, "make the directory of the store", error);
    return status;
}

enum fw_status store_file_check_room(const char *file, int64_t bytes, struct fw_error *error)
{
    char directory[STORE_PATH_SIZE];
    struct statvfs place;
    enum fw_status status = directory_of(file, directory, error);
    if (status != FW_OK)
        return status;
    if (statvfs(directory, &place) != 0)
        return system_fault(directory, "look at the file system", error);
    uint64_t free_bytes = (uint64_t)place.f_bavail * place.f_frsize;
    if (free_bytes < (uint64_t)bytes)
        return fw_error_set(error, FW_IO, "%s: %llu MiB free, %llu MiB needed", directory,
                            (unsigned long long)(free_bytes >> 20), (unsigned long long)bytes >> 20);
    return FW_OK;
}

/* Locks and shared memory are not to be trusted there. */
static bool is_network_magic(unsigned long magic)
{
    return magic == NFS_SUPER_MAGIC || magic == SMB_SUPER_MAGIC || magic == CIFS_SUPER_MAGIC ||
           magic == SMB2_SUPER_MAGIC;
}

enum fw_status store_file_check_place(const char *file, struct fw_error *error)
{
    char directory[STORE_PATH_SIZE];
    struct statfs place;
    struct stat found;
    enum fw_status status = directory_of(file, directory, error);
    if (status != FW_OK)
        return status;
    if (statfs(directory, &place) != 0)
        return system_fault(directory, "look at the file system", error);
    if (is_network_magic((unsigned long)place.f_type & 0xffffffffUL))
        return fw_error_set(
            error, FW_IO, "%s: the store must be on a disk of this machine, not on a network file system", directory);
    if (stat(file, &found) == 0 && (found.st_mode & S_IWOTH) != 0)
        return fw_error_set(error, FW_IO, "%s: everyone may write this store (mode %04o, expected 0640)", file,
                            (unsigned)found.st_mode & 07777U);
    return FW_OK;
}

enum fw_status store_file_sync_directory(const char *file, struct fw_error *error)
{
    char directory[STORE_PATH_SIZE];
    enum fw_status status = directory_of(file, directory, error);
    if (status != FW_OK)
        return status;
    int descriptor = open(directory, O_RDONLY | O_DIRECTORY | O_CLOEXEC);
    if (descriptor < 0 || fsync(descriptor) != 0)
        status = system_fault(directory, "sync", error);
    if (descriptor >= 0)
        close(descriptor);
    return status;
}

static enum fw_status fill_new(const char *path, struct fw_error *error)
{
    sqlite3 *db = NULL;
    char *sql = sqlite3_mprintf("PRAGMA auto_vacuum = INCREMENTAL; PRAGMA synchronous = FULL; BEGIN; "
                                "PRAGMA application_id = %d; PRAGMA user_version = %d; %s; COMMIT;",
                                STORE_APPLICATION_ID, STORE_VERSION, store_schema);
    enum fw_status status = sql != NULL ? FW_OK : fw_error_set(error, FW_NO_MEMORY, "%s: out of memory", path);
    if (status == FW_OK &&
        (sqlite3_open_v2(path, &db, SQLITE_OPEN_READWRITE | SQLITE_OPEN_NOMUTEX, NULL) != SQLITE_OK ||
         sqlite3_exec(db, sql, NULL, NULL, NULL) != SQLITE_OK))
        status = fw_error_set(error, FW_IO, "%s: cannot lay out a store: %s", path, sqlite3_errmsg(db));
    sqlite3_close(db);
    sqlite3_free(sql);
    return status;
}

enum fw_status store_file_create(const char *file, struct fw_error *error)
{
    char path[STORE_PATH_SIZE];
    char journal[STORE_PATH_SIZE];
    snprintf(path, sizeof path, "%s.new", file);
    snprintf(journal, sizeof journal, "%s.new-journal", file);
    unlink(path); /* left by a run that was cut off */
    unlink(journal);
    int descriptor = open(path, O_RDWR | O_CREAT | O_EXCL | O_CLOEXEC, 0640);
    if (descriptor < 0)
        return system_fault(path, "create", error);
    close(descriptor);
    enum fw_status status = fill_new(path, error);
    if (status == FW_OK && rename(path, file) != 0)
        status = system_fault(file, "put a new store in place", error);
    if (status == FW_OK)
        status = store_file_sync_directory(file, error);
    else
        unlink(path);
    return status;
}

bool store_file_has_log(const char *file)
{
    char path[STORE_PATH_SIZE];
    struct stat found;
    snprintf(path, sizeof path, "%s-wal", file);
    return stat(path, &found) == 0 && found.st_size > 0;
}

enum fw_status store_quick_check(sqlite3 *db, const char *file, struct fw_error *error)
{
    sqlite3_stmt *query = NULL;
    int result = sqlite3_prepare_v2(db, "PRAGMA quick_check(1)", -1, &query, NULL);
    if (result == SQLITE_OK)
        result = sqlite3_step(query);
    enum fw_status status = FW_OK;
    int family = result & 0xff;
    const char *answer = result == SQLITE_ROW ? (const char *)sqlite3_column_text(query, 0) : NULL;
    if (result == SQLITE_ROW && (answer == NULL || strcmp(answer, "ok") != 0))
        status = fw_error_set(error, FW_DAMAGED, "%s: the store is damaged: %s", file, answer != NULL ? answer : "?");
    else if (family == SQLITE_CORRUPT || family == SQLITE_NOTADB)
        status = fw_error_set(error, FW_DAMAGED, "%s: the store is damaged: %s", file, sqlite3_errmsg(db));
    else if (result != SQLITE_ROW)
        status = fw_error_set(error, FW_IO, "%s: cannot check the store: %s (SQLite code %d)", file,
                              sqlite3_errmsg(db), sqlite3_extended_errcode(db));
    sqlite3_finalize(query);
    return status;
}

enum fw_status store_file_check(const char *file, struct fw_error *error)
{
    sqlite3 *db = NULL;
    enum fw_status status;
    if (sqlite3_open_v2(file, &db, SQLITE_OPEN_READONLY | SQLITE_OPEN_NOMUTEX, NULL) != SQLITE_OK)
        status = fw_error_set(error, FW_IO, "%s: cannot open the store: %s", file, sqlite3_errmsg(db));
    else {
        sqlite3_db_config(db, SQLITE_DBCONFIG_NO_CKPT_ON_CLOSE, 1, (int *)NULL);
        sqlite3_exec(db, "PRAGMA cell_size_check = ON", NULL, NULL, NULL);
        status = store_quick_check(db, file, error);
    }
    sqlite3_close(db);
    return status;
}
