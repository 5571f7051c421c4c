/* SPDX-License-Identifier: GPL-3.0-or-later */
/* POSIX knows no request for large pages; Linux shows its own to those who ask for more than POSIX. */
#define _DEFAULT_SOURCE 1
#include "base/pages.h"

#include <stdint.h>
#include <sys/mman.h>
#ifdef __GLIBC__
#include <malloc.h>
#endif

#define LARGE_PAGE ((uintptr_t)2 << 20)
#define KEPT_MOST (64 << 20)

void lw_prefer_large_pages(void *block, size_t size)
{
#ifdef MADV_HUGEPAGE
    if (size < 2 * LARGE_PAGE)
        return;
    uintptr_t from = ((uintptr_t)block + LARGE_PAGE - 1) / LARGE_PAGE * LARGE_PAGE;
    uintptr_t to = ((uintptr_t)block + size) / LARGE_PAGE * LARGE_PAGE;
    if (to > from) /* a refusal changes nothing but the time */
        (void)madvise((void *)from, (size_t)(to - from), MADV_HUGEPAGE);
#else
    (void)block;
    (void)size;
#endif
}

void lw_keep_freed_memory(void)
{
#ifdef __GLIBC__
    (void)mallopt(M_MMAP_THRESHOLD, (int)(2 * LARGE_PAGE));
    (void)mallopt(M_TRIM_THRESHOLD, KEPT_MOST);
#endif
}

size_t lw_large_page(size_t bytes)
{
    return bytes >= LARGE_PAGE ? LARGE_PAGE : 0;
}
