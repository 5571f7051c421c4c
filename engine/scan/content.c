/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "base/pages.h"
#include "base/sha256.h"
#include "scan/number.h"
#include "scan/reader.h"
#include "scan/rows.h"

#include <errno.h>
#include <fcntl.h>
#include <stdint.h>
#include <string.h>
#include <sys/stat.h>
#include <unistd.h>
#include <zlib.h>

#define SIZE_MOST ((size_t)512 << 20)
#define SIZE_START ((size_t)64 << 10)
#define PORTION ((size_t)8 << 20) /* between two looks at the cancel flag */

#define TOO_LARGE "is this a scan? split the file or crop it first"

/* Room for `size` bytes and the spare ones, keeping what is there. The block's size is kept in front, so
 * that it can be given back whatever happened to content->size. */
typedef struct room {
    size_t total;
    size_t pad;
} room;
_Static_assert(sizeof(room) >= LW_ROWS_FRONT, "the fast loop reads that far in front of the bytes");

static char *room_of(lw_engine *engine, char *old, size_t size, lw_error *err)
{
    room *block = old ? (room *)(void *)old - 1 : NULL;
    size_t total = size + sizeof(room) + LW_NUMBER_SPARE;
    room *grown = engine->allocator.resize(engine->allocator.user, block, block ? block->total : 0, total);
    if (grown == NULL) {
        lw_fail(err, LW_OUT_OF_MEMORY, "raise the memory limit or crop the scan",
                "out of memory: %zu bytes were refused", total);
        return NULL;
    }
    grown->total = total;
    lw_prefer_large_pages(grown, total);
    return (char *)(grown + 1);
}

static void room_give(lw_engine *engine, char *bytes)
{
    if (bytes != NULL) {
        room *block = (room *)(void *)bytes - 1;
        lw_give(engine, block, block->total);
    }
}

void lw_content_free(lw_engine *engine, lw_content *content)
{
    room_give(engine, content->bytes);
    content->bytes = NULL;
}

void lw_content_settle(lw_content *content)
{
    if (content->hash[0] == '\0')
        lw_sha256_hex(content->bytes, content->size, content->hash);
}

lw_status lw_content_check_text(lw_content *content, lw_error *err)
{
    const char *bytes = content->bytes;
    if (content->size == 0)
        return lw_fail_at(err, LW_BAD_DATA, content->name, 0, "export or copy the scan again",
                          "the file is empty");
    if (content->size >= 2 && (memcmp(bytes, "\xff\xfe", 2) == 0 || memcmp(bytes, "\xfe\xff", 2) == 0))
        return lw_fail_at(err, LW_BAD_DATA, content->name, 0, "save it as plain text (ASCII or UTF-8)",
                          "the text is in UTF-16");
    if (memchr(bytes, '\0', content->size) != NULL)
        return lw_fail_at(err, LW_BAD_DATA, content->name, 0,
                          "export the scan as columns of text or as pdCIF", "binary content, not a text");
    /* one old line end only: carriage returns alone */
    if (memchr(bytes, '\n', content->size) == NULL && memchr(bytes, '\r', content->size) != NULL) {
        lw_content_settle(content);
        for (size_t i = 0; i < content->size; i++)
            if (content->bytes[i] == '\r')
                content->bytes[i] = '\n';
    }
    /* the end mark of old systems */
    if (bytes[content->size - 1] == 0x1a) {
        lw_content_settle(content);
        content->bytes[--content->size] = '\0';
    }
    return LW_OK;
}

static void *zlib_take(void *user, unsigned count, unsigned size)
{
    return room_of(user, NULL, (size_t)count * size, NULL);
}

static void zlib_give(void *user, void *block)
{
    room_give(user, block);
}

static lw_status bad_gzip(const lw_content *content, const char *what, lw_error *err)
{
    return lw_fail_at(err, LW_BAD_DATA, content->name, 0, "fetch or compress the file again",
                      "the gzip file %s", what);
}

/* Inflates every member of a gzip file (RFC 1952) from packed[size] into content->bytes. */
static lw_status inflate_all(lw_engine *engine, const char *packed, size_t size, lw_content *content,
                             lw_error *err)
{
    z_stream stream = {.zalloc = zlib_take, .zfree = zlib_give, .opaque = engine};
    if (inflateInit2(&stream, 15 + 16) != Z_OK)
        return lw_fail(err, LW_OUT_OF_MEMORY, NULL, "out of memory: no room to inflate");
    size_t room_size = 4 * size < SIZE_START ? SIZE_START : 4 * size, used = 0;
    if (room_size > SIZE_MOST)
        room_size = SIZE_MOST;
    lw_status status = LW_OK;
    content->bytes = room_of(engine, NULL, room_size, err);
    if (content->bytes == NULL)
        status = LW_OUT_OF_MEMORY;
    /* zlib wants a pointer to non-const but does not write through it */
    stream.next_in = (unsigned char *)(uintptr_t)packed;
    stream.avail_in = (unsigned)size;
    while (status == LW_OK) {
        size_t portion = room_size - used < PORTION ? room_size - used : PORTION;
        stream.next_out = (unsigned char *)content->bytes + used;
        stream.avail_out = (unsigned)portion;
        int result = inflate(&stream, Z_NO_FLUSH);
        used += portion - stream.avail_out;
        if (result == Z_STREAM_END) {
            /* zeros after a member are padding (of tapes and disks); anything else must be a member */
            while (stream.avail_in > 0 && *stream.next_in == 0) {
                stream.next_in++;
                stream.avail_in--;
            }
            if (stream.avail_in == 0)
                break;
            if (inflateReset(&stream) != Z_OK)
                status = bad_gzip(content, "is damaged", err);
        } else if (result == Z_MEM_ERROR)
            status = lw_fail(err, LW_OUT_OF_MEMORY, NULL, "out of memory: no room to inflate");
        else if (result != Z_OK && result != Z_BUF_ERROR)
            status = bad_gzip(content, "is damaged", err);
        else if (stream.avail_out > 0)
            status = bad_gzip(content, "ends too early", err);
        else if (used == room_size) {
            if (room_size == SIZE_MOST)
                status = lw_fail_at(err, LW_BAD_DATA, content->name, 0, TOO_LARGE,
                                    "the gzip file holds more than %zu MB", SIZE_MOST >> 20);
            else {
                room_size = room_size > SIZE_MOST / 2 ? SIZE_MOST : 2 * room_size;
                char *grown = room_of(engine, content->bytes, room_size, err);
                if (grown == NULL)
                    status = LW_OUT_OF_MEMORY;
                else
                    content->bytes = grown;
            }
        }
        if (status == LW_OK)
            status = lw_engine_poll(engine, err);
    }
    inflateEnd(&stream);
    content->size = used;
    return status;
}

/* Bytes are in content: inflate them if they are gzip, and end them in zeros. */
static lw_status unpack(lw_engine *engine, lw_content *content, lw_error *err)
{
    lw_status status = LW_OK;
    if (content->size >= 2 && memcmp(content->bytes, "\x1f\x8b", 2) == 0) {
        char *packed = content->bytes;
        size_t size = content->size;
        lw_content_settle(content);
        content->bytes = NULL;
        content->size = 0;
        status = inflate_all(engine, packed, size, content, err);
        room_give(engine, packed);
    }
    if (status == LW_OK && content->size >= 3 && memcmp(content->bytes, "\xef\xbb\xbf", 3) == 0) {
        lw_content_settle(content);
        /* moved out of the way rather than skipped: the block still starts at bytes */
        content->size -= 3;
        memmove(content->bytes, content->bytes + 3, content->size);
    }
    if (status == LW_OK)
        memset(content->bytes + content->size, 0, LW_NUMBER_SPARE);
    else
        lw_content_free(engine, content);
    return status;
}

static lw_status read_all(lw_engine *engine, int file, lw_content *content, lw_error *err)
{
    struct stat about;
    size_t room_size = SIZE_START;
    if (fstat(file, &about) != 0)
        return lw_fail_at(err, LW_IO, content->name, 0, "try again", "the file can't be looked at");
    if (S_ISREG(about.st_mode) && about.st_size > 0)
        room_size = (size_t)about.st_size < SIZE_MOST ? (size_t)about.st_size + 1 : SIZE_MOST;
    if (S_ISDIR(about.st_mode) || S_ISCHR(about.st_mode) || S_ISBLK(about.st_mode))
        return lw_fail_at(err, LW_IO, content->name, 0, "name a file that holds a scan", "%s, not a file",
                          S_ISDIR(about.st_mode) ? "this is a folder" : "this is a device");
    content->bytes = room_of(engine, NULL, room_size, err);
    if (content->bytes == NULL)
        return LW_OUT_OF_MEMORY;
    for (;;) {
        if (content->size == room_size) {
            if (room_size == SIZE_MOST)
                return lw_fail_at(err, LW_BAD_DATA, content->name, 0, TOO_LARGE,
                                  "the file is larger than %zu MB", SIZE_MOST >> 20);
            room_size = room_size > SIZE_MOST / 2 ? SIZE_MOST : 2 * room_size;
            char *grown = room_of(engine, content->bytes, room_size, err);
            if (grown == NULL)
                return LW_OUT_OF_MEMORY;
            content->bytes = grown;
        }
        size_t portion = room_size - content->size < PORTION ? room_size - content->size : PORTION;
        ssize_t got = read(file, content->bytes + content->size, portion);
        if (got == 0)
            return LW_OK;
        if (got < 0 && errno != EINTR) {
            char reason[128];
            if (strerror_r(errno, reason, sizeof reason) != 0)
                reason[0] = '\0';
            return lw_fail_at(err, LW_IO, content->name, 0, "try again, or copy the file to a sound disk",
                              "the file can't be read (%s)", reason);
        }
        content->size += got > 0 ? (size_t)got : 0;
        lw_status status = lw_engine_poll(engine, err);
        if (status != LW_OK)
            return status;
    }
}

lw_status lw_content_open(lw_engine *engine, const char *path, lw_content *content, lw_error *err)
{
    *content = (lw_content){.name = path};
    int file = open(path, O_RDONLY | O_CLOEXEC | O_NOCTTY);
    if (file < 0) {
        char reason[128];
        if (strerror_r(errno, reason, sizeof reason) != 0)
            reason[0] = '\0';
        return lw_fail_at(err, LW_IO, path, 0, "check the name and the folder",
                          "the file can't be opened (%s)", reason);
    }
    lw_status status = read_all(engine, file, content, err);
    close(file);
    if (status == LW_OK)
        return unpack(engine, content, err);
    lw_content_free(engine, content);
    return status;
}

lw_status lw_content_copy(lw_engine *engine, const char *name, const char *bytes, size_t size,
                          lw_content *content, lw_error *err)
{
    *content = (lw_content){.name = name};
    if (size > SIZE_MOST)
        return lw_fail_at(err, LW_BAD_DATA, name, 0, TOO_LARGE, "the content is larger than %zu MB",
                          SIZE_MOST >> 20);
    content->bytes = room_of(engine, NULL, size, err);
    if (content->bytes == NULL)
        return LW_OUT_OF_MEMORY;
    if (size > 0)
        memcpy(content->bytes, bytes, size);
    content->size = size;
    return unpack(engine, content, err);
}
