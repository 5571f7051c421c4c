/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Large pages: memory that is touched for the first time costs a fault a page, on virtual machines several
 * microseconds each, so that a fresh block of some megabytes costs more than reading the numbers into it. */
#ifndef LW_BASE_PAGES_H
#define LW_BASE_PAGES_H

#include <stddef.h>

/* Asks the system to back a block by large pages where it can; does nothing for blocks below 4 MB and on
 * systems that have no such request. What is in the block stays. */
void lw_prefer_large_pages(void *block, size_t size);

/* For a program, not a library, since it concerns the whole process: up to 64 MB of memory that was given back in
 * blocks below 4 MB wait for the next request, instead of going to the system and coming back in fresh pages. */
void lw_keep_freed_memory(void);

/* Size of a large page if `bytes` would fill one, else 0. */
size_t lw_large_page(size_t bytes);

#endif
