/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "record/file.h"

#include "record/quiet.h"

#include <dirent.h>
#include <errno.h>
#include <fcntl.h>
#include <limits.h>
#include <signal.h>
#include <stdint.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/stat.h>
#include <sys/types.h>
#include <sys/uio.h>
#include <unistd.h>

#define PIECE ((size_t)1 << 20) /* written between two looks at the cancel flag */

static const char *remedy_of(int reason)
{
    switch (reason) {
    case ENOSPC:
    case EDQUOT: return "free some space, or choose another folder";
    case EFBIG: return "raise the limit on file size (ulimit -f), or choose another folder";
    case EACCES:
    case EPERM: return "choose a folder you may write to, or ask for permission";
    case EROFS: return "the disk is mounted read-only: choose another folder";
    case ENOENT: return "check the path: the file or a folder on the way doesn't exist";
    case ENOTDIR: return "check the path: a part of it is a file, not a folder";
    case EISDIR: return "give the path of a file, not of a folder";
    case ELOOP: return "the path is a symbolic link: give the real path";
    case EMFILE:
    case ENFILE: return "too many files are open: close some and try again";
    default: return "check the disk and the path";
    }
}

static lw_status refuse(lw_error *err, const char *verb, const char *path, int reason)
{
    char words[128];
    if (strerror_r(reason, words, sizeof words) != 0)
        snprintf(words, sizeof words, "error %d", reason);
    return lw_fail(err, LW_IO, remedy_of(reason), "can't %s %s: %s", verb, path, words);
}

/* Opens a folder below the fence part by part, so that a link that was put there after somebody looked
 * leads nowhere. -1 with errno on failure. */
static int open_inside(const lw_engine *engine, const char *folder)
{
    size_t n = strlen(engine->fence);
    if (strncmp(folder, engine->fence, n) != 0 || folder[n] != '/') {
        errno = EPERM;
        return -1;
    }
    int at = open(engine->fence, O_RDONLY | O_DIRECTORY | O_CLOEXEC | (engine->fence_no_link ? O_NOFOLLOW : 0));
    for (const char *part = folder + n + strspn(folder + n, "/"); at >= 0 && *part != '\0';) {
        char name[NAME_MAX + 1];
        size_t length = strcspn(part, "/");
        int next = -1;
        if (length >= sizeof name)
            errno = ENAMETOOLONG;
        else if (length == 2 && part[0] == '.' && part[1] == '.')
            errno = EPERM;
        else {
            memcpy(name, part, length);
            name[length] = '\0';
            next = openat(at, name, O_RDONLY | O_DIRECTORY | O_NOFOLLOW | O_CLOEXEC);
        }
        int reason = errno;
        close(at);
        errno = reason;
        at = next;
        part += length;
        part += strspn(part, "/");
    }
    return at;
}

/* Opens the folder of `path`; *name is set to its last part. -1 with errno on failure. */
static int open_folder(const lw_engine *engine, const char *path, const char **name)
{
    const char *slash = strrchr(path, '/');
    char folder[PATH_MAX];
    *name = slash ? slash + 1 : path;
    if (**name == '\0' || strcmp(*name, ".") == 0 || strcmp(*name, "..") == 0) {
        errno = path[0] == '\0' ? ENOENT : EISDIR;
        return -1;
    }
    size_t n = slash ? (size_t)(slash - path) + 1 : 0; /* with its slash, so that "/" stays "/" */
    if (n >= sizeof folder) {
        errno = ENAMETOOLONG;
        return -1;
    }
    memcpy(folder, path, n);
    folder[n] = '\0';
    if (engine->fence != NULL)
        return open_inside(engine, folder);
    return open(n > 0 ? folder : ".", O_RDONLY | O_DIRECTORY | O_CLOEXEC);
}

/* 0, or the errno of the write that failed; ECANCELED if the user wants to stop. */
static int write_all(lw_engine *engine, int file, const char *bytes, size_t size, lw_error *err)
{
    for (size_t done = 0; done < size;) {
        if (lw_engine_poll(engine, err) != LW_OK)
            return ECANCELED;
        ssize_t n = write(file, bytes + done, size - done < PIECE ? size - done : PIECE);
        if (n < 0 && errno != EINTR)
            return errno;
        if (n > 0)
            done += (size_t)n;
        else if (n == 0)
            return ENOSPC;
    }
    return 0;
}

/* Makes a file of a name not yet taken in the folder. -1 with errno on failure. */
static int make_temporary(int folder, char *name, size_t size)
{
    for (int attempt = 0; attempt < 1000; attempt++) {
        snprintf(name, size, ".lw-%ld-%d.part", (long)getpid(), attempt);
        int file = openat(folder, name, O_WRONLY | O_CREAT | O_EXCL | O_NOFOLLOW | O_CLOEXEC, 0666);
        if (file >= 0 || errno != EEXIST)
            return file;
    }
    return -1;
}

lw_status lw_write_file(lw_engine *engine, const char *path, const void *bytes, size_t size, lw_error *err)
{
    const char *name;
    char temporary[64];
    struct stat old;
    int folder = open_folder(engine, path, &name);
    if (folder < 0)
        return refuse(err, "write", path, errno);
    /* renaming over a device such as /dev/null would destroy it */
    if (fstatat(folder, name, &old, AT_SYMLINK_NOFOLLOW) == 0 && !S_ISREG(old.st_mode) && !S_ISLNK(old.st_mode)) {
        close(folder);
        return lw_fail(err, LW_IO, "give the path of a plain file", "can't write %s: it is a %s", path,
                       S_ISDIR(old.st_mode) ? "folder" : "device, pipe or socket");
    }
    int file = make_temporary(folder, temporary, sizeof temporary);
    if (file < 0) {
        int reason = errno;
        close(folder);
        return refuse(err, "write", path, reason);
    }
    lw_quiet quiet;
    lw_quiet_begin(&quiet, SIGXFSZ);
    int reason = write_all(engine, file, bytes, size, err);
    lw_quiet_end(&quiet);
    if (reason == 0 && fsync(file) != 0)
        reason = errno;
    if (close(file) != 0 && reason == 0)
        reason = errno;
    if (reason == 0 && renameat(folder, temporary, folder, name) != 0)
        reason = errno;
    if (reason != 0)
        unlinkat(folder, temporary, 0);
    else
        fsync(folder); /* some file systems can't flush a folder; the file itself is safe by now */
    close(folder);
    if (reason == ECANCELED)
        return LW_CANCELLED;
    return reason == 0 ? LW_OK : refuse(err, "write", path, reason);
}

/* The process that makes a temporary file of this name, or 0 if it is no such name. */
static pid_t maker_of(const char *name)
{
    char *end, again[64];
    if (strncmp(name, ".lw-", 4) != 0)
        return 0;
    long process = strtol(name + 4, &end, 10), attempt = *end == '-' ? strtol(end + 1, &end, 10) : -1;
    if (process <= 0 || process > INT_MAX || attempt < 0)
        return 0;
    /* spelt just so: no signs, blanks or leading noughts, and nothing behind */
    snprintf(again, sizeof again, ".lw-%ld-%ld.part", process, attempt);
    return strcmp(again, name) == 0 ? (pid_t)process : 0;
}

void lw_sweep_folder(const lw_engine *engine, const char *path)
{
    const char *name;
    int folder = open_folder(engine, path, &name);
    DIR *entries = folder >= 0 ? fdopendir(folder) : NULL;
    if (entries == NULL) {
        if (folder >= 0)
            close(folder);
        return;
    }
    for (const struct dirent *entry; (entry = readdir(entries)) != NULL;) {
        struct stat here;
        pid_t process = maker_of(entry->d_name);
        /* signal 0 only asks; any other answer than "no such process" means that it may be alive */
        if (process > 0 && kill(process, 0) != 0 && errno == ESRCH &&
            fstatat(folder, entry->d_name, &here, AT_SYMLINK_NOFOLLOW) == 0 && S_ISREG(here.st_mode) &&
            here.st_uid == geteuid())
            (void)unlinkat(folder, entry->d_name, 0);
    }
    closedir(entries);
}

static bool is_folder(const char *path)
{
    struct stat here;
    return stat(path, &here) == 0 && S_ISDIR(here.st_mode);
}

lw_status lw_make_folder(const char *path, lw_error *err)
{
    char part[PATH_MAX];
    size_t n = strlen(path);
    if (n == 0 || n >= sizeof part)
        return refuse(err, "make the folder", path, n == 0 ? ENOENT : ENAMETOOLONG);
    memcpy(part, path, n + 1);
    for (size_t i = 1; i <= n; i++) {
        if (part[i] != '/' && part[i] != '\0')
            continue;
        char kept = part[i];
        part[i] = '\0';
        /* what exists is looked at first: mkdir on it may say EROFS or EACCES */
        if (!is_folder(part) && mkdir(part, 0777) != 0 && !(errno == EEXIST && is_folder(part)))
            return refuse(err, "make the folder", part, errno == EEXIST ? ENOTDIR : errno);
        part[i] = kept;
    }
    return LW_OK;
}

lw_status lw_append_line(lw_engine *engine, const char *path, const char *line, lw_error *err)
{
    const char *name;
    int folder = open_folder(engine, path, &name);
    if (folder < 0)
        return refuse(err, "write", path, errno);
    /* what follows a crash may be half a line without its newline: begin on a new one then */
    int file = openat(folder, name, O_RDWR | O_APPEND | O_CREAT | O_NOFOLLOW | O_CLOEXEC | O_NONBLOCK, 0666);
    int open_reason = errno;
    close(folder);
    if (file < 0)
        return refuse(err, "write", path, open_reason);
    struct stat here;
    int reason = fstat(file, &here) != 0 ? errno : 0;
    if (reason == 0 && !S_ISREG(here.st_mode)) {
        close(file);
        return lw_fail(err, LW_IO, "give the path of a plain file", "can't append to %s: it is not a plain file", path);
    }
    char last = '\n';
    if (reason == 0 && here.st_size > 0 && pread(file, &last, 1, here.st_size - 1) != 1)
        reason = EIO;
    size_t n = strlen(line);
    struct iovec parts[3] = {{(void *)(uintptr_t) "\n", last == '\n' ? 0 : 1},
                             {(void *)(uintptr_t)line, n},
                             {(void *)(uintptr_t) "\n", 1}};
    size_t whole = parts[0].iov_len + n + 1;
    if (reason == 0) {
        lw_quiet quiet;
        lw_quiet_begin(&quiet, SIGXFSZ);
        ssize_t done;
        do
            done = writev(file, parts, 3);
        while (done < 0 && errno == EINTR);
        if (done < 0)
            reason = errno;
        else if ((size_t)done < whole) {
            reason = ENOSPC;
            if (ftruncate(file, here.st_size) != 0) /* half a line is taken back */
                reason = errno;
        }
        lw_quiet_end(&quiet);
    }
    if (reason == 0 && fsync(file) != 0)
        reason = errno;
    if (close(file) != 0 && reason == 0)
        reason = errno;
    return reason == 0 ? LW_OK : refuse(err, "append to", path, reason);
}

lw_status lw_read_file(lw_arena *arena, const char *path, size_t most, char **bytes, size_t *size, lw_error *err)
{
    int file = open(path, O_RDONLY | O_CLOEXEC | O_NONBLOCK); /* NONBLOCK: a pipe there must not hang us */
    if (file < 0)
        return refuse(err, "read", path, errno);
    struct stat here;
    lw_status status = LW_OK;
    size_t n = 0, room = 0;
    char *block = NULL;
    if (fstat(file, &here) != 0)
        status = refuse(err, "read", path, errno);
    else if (!S_ISREG(here.st_mode))
        status = lw_fail(err, LW_IO, "give the path of a plain file", "can't read %s: it is not a plain file", path);
    else if ((uintmax_t)here.st_size > most)
        status = lw_fail(err, LW_BAD_DATA, "check that this is the file you mean",
                         "%s is too large: %jd bytes, at most %zu are read", path, (intmax_t)here.st_size, most);
    else {
        room = (size_t)here.st_size;
        block = lw_arena_take(arena, room + 1, 1, err);
        status = block ? LW_OK : LW_OUT_OF_MEMORY;
    }
    while (status == LW_OK && n < room) {
        ssize_t got = read(file, block + n, room - n < PIECE ? room - n : PIECE);
        if (got < 0 && errno != EINTR)
            status = refuse(err, "read", path, errno);
        else if (got == 0)
            break; /* it has shrunk meanwhile */
        else if (got > 0)
            n += (size_t)got;
        if (status == LW_OK)
            status = lw_engine_poll(arena->engine, err);
    }
    close(file);
    if (status == LW_OK) {
        block[n] = '\0';
        *bytes = block;
        *size = n;
    }
    return status;
}
