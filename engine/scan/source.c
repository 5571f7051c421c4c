/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "scan/source.h"

struct lw_source {
    lw_engine *engine;
    size_t owners;
    lw_content content; /* its bytes are NULL once the hash is there */
};

lw_status lw_source_new(lw_engine *engine, lw_content *content, lw_source **source, lw_error *err)
{
    *source = lw_take(engine, sizeof **source, err);
    if (*source == NULL)
        return LW_OUT_OF_MEMORY;
    **source = (lw_source){.engine = engine, .owners = 1, .content = *content};
    content->bytes = NULL;
    (*source)->content.name = NULL; /* the caller's, and not needed any more */
    if ((*source)->content.hash[0] != '\0')
        lw_content_free(engine, &(*source)->content);
    return LW_OK;
}

lw_source *lw_source_share(lw_source *source)
{
    if (source != NULL)
        source->owners++;
    return source;
}

void lw_source_drop(lw_source *source)
{
    if (source == NULL || --source->owners > 0)
        return;
    lw_content_free(source->engine, &source->content);
    lw_give(source->engine, source, sizeof *source);
}

const char *lw_source_hash(lw_source *source)
{
    lw_content_settle(&source->content);
    lw_content_free(source->engine, &source->content);
    return source->content.hash;
}
