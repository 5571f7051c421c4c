/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The fence around writing. Paths are walked part by part with O_NOFOLLOW from the out folder, so that
 * neither "..", an absolute path nor a link that was left there leads outside. */
#include "bind/outputs.h"
#include "record/file.h"

#include <errno.h>
#include <fcntl.h>
#include <stdio.h>
#include <string.h>
#include <sys/stat.h>
#include <unistd.h>

/* Makes and opens the folders of `rest` below the open folder `at` (which is closed), looking at every
 * part. Returns 0, or an errno with `what` set to words. Raises nothing. */
static int walk(int at, const char *rest, const char **what)
{
    char part[256];
    *what = NULL;
    while (*what == NULL) {
        size_t length = strcspn(rest, "/");
        bool last = rest[length] == '\0';
        if (length == 0 || length >= sizeof part || (length == 1 && rest[0] == '.') ||
            (length == 2 && rest[0] == '.' && rest[1] == '.')) {
            *what = length >= sizeof part ? "a part of the name is too long" : "'.', '..' and empty parts are refused";
            break;
        }
        memcpy(part, rest, length);
        part[length] = '\0';
        rest += length + !last;
        struct stat info;
        if (fstatat(at, part, &info, AT_SYMLINK_NOFOLLOW) == 0 && S_ISLNK(info.st_mode)) {
            *what = "a part of it is a link";
            break;
        }
        if (last)
            break;
        if (mkdirat(at, part, 0777) != 0 && errno != EEXIST) {
            *what = strerror(errno);
            break;
        }
        int next = openat(at, part, O_RDONLY | O_DIRECTORY | O_NOFOLLOW | O_CLOEXEC);
        if (next < 0) {
            *what = strerror(errno);
            break;
        }
        close(at);
        at = next;
    }
    close(at);
    return *what != NULL;
}

/* The first time that something is written to a folder below out, what a killed run has left there goes. */
static void sweep(lua_State *L, const lwb_home *home, const char *path)
{
    const char *slash = strrchr(path, '/');
    luaL_checkstack(L, 5, NULL);
    luaL_getsubtable(L, LUA_REGISTRYINDEX, "linewright.swept");
    lua_pushlstring(L, path, (size_t)(slash - path));
    lua_pushvalue(L, -1);
    if (lua_rawget(L, -3) == LUA_TNIL) {
        lw_sweep_folder(&home->engine, path);
        lua_pushvalue(L, -2);
        lua_pushboolean(L, 1);
        lua_rawset(L, -5);
    }
    lua_pop(L, 3);
}

void lwb_allow_write(lua_State *L, const char *path, const char *verb)
{
    const lwb_home *home = lwb_home_of(L);
    lw_error err = LW_ERROR_NONE;
    size_t n = strlen(home->out), n_fence = strlen(home->fence);
    if (home->in_item > 0) /* it may run in a process of its own, beside others */
        lwb_refuse(L, "let it return what is to be written", "%s: a function given to job:each can't write", verb);
    if (!home->confined) {
        char folder[LWB_PATH_MOST];
        if (n > 0 && strncmp(path, home->out, n) == 0 && path[n] == '/' && strlen(path) < sizeof folder) {
            snprintf(folder, sizeof folder, "%s", path);
            *strrchr(folder, '/') = '\0';
            lwb_check(L, lw_make_folder(folder, &err), &err);
            sweep(L, home, path);
        }
        return;
    }
    if (n == 0)
        lwb_refuse(L, "declare it with lw.recipe { ... } and start it with out=DIR", "%s: only a recipe may write", verb);
    if (strncmp(path, home->out, n) != 0 || path[n] != '/')
        lwb_refuse(L, "use job:path(name), or start with --trusted if you trust the recipe",
                   "%s: '%.200s' is not under %s", verb, path, home->out);
    /* the outermost recipe's folder is the user's choice; what lies below it, an inner recipe's own folder
     * included, is walked part by part */
    struct stat info;
    bool chosen = !home->engine.fence_no_link;
    if (!chosen && lstat(home->fence, &info) == 0 && S_ISLNK(info.st_mode))
        lwb_refuse(L, "choose it yourself with out=DIR", "%s: the folder '%s' is a link", verb, home->fence);
    if (strncmp(path, home->fence, n_fence) != 0 || path[n_fence] != '/')
        lwb_refuse(L, NULL, "%s: '%.200s' is not under %s", verb, path, home->fence);
    lwb_check(L, lw_make_folder(home->fence, &err), &err);
    int at = open(home->fence, O_RDONLY | O_DIRECTORY | O_CLOEXEC | (chosen ? 0 : O_NOFOLLOW));
    if (at < 0)
        lwb_refuse(L, NULL, "%s: can't open the folder %s: %s", verb, home->fence, strerror(errno));
    const char *what = NULL;
    if (walk(at, path + n_fence + 1, &what) != 0) /* closes `at` */
        lwb_refuse(L, "give a plain name below the out folder", "%s: '%.200s' is refused: %s", verb, path, what);
    sweep(L, home, path);
}

const char *lwb_push_out_path(lua_State *L, const char *name, const char *verb)
{
    const lwb_home *home = lwb_home_of(L);
    if (name[0] == '/')
        lwb_refuse(L, "give a name below the out folder", "%s: '%.200s' is an absolute path", verb, name);
    const char *path = lua_pushfstring(L, "%s/%s", home->out, name);
    if (strlen(path) >= LWB_PATH_MOST)
        lwb_refuse(L, NULL, "%s: the path is too long", verb);
    for (const char *c = name; *c != '\0'; c += strcspn(c, "/") + (c[strcspn(c, "/")] == '/'))
        if (strncmp(c, "..", 2) == 0 && (c[2] == '/' || c[2] == '\0'))
            lwb_refuse(L, "give a name below the out folder", "%s: '%.200s' leads out of the folder", verb, name);
    lwb_allow_write(L, path, verb);
    return path;
}
