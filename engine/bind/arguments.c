/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Self, arguments and option tables: what every method does first. */
#include "bind/bind.h"

#include <stdio.h>
#include <string.h>

#define PREFIX "linewright."

void *lwb_new(lua_State *L, const lwb_noun *noun, size_t size, int n_values)
{
    char name[64];
    snprintf(name, sizeof name, PREFIX "%s", noun->name);
    luaL_checkstack(L, 4, NULL);
    void *self = lua_newuserdatauv(L, size, n_values);
    memset(self, 0, size);
    luaL_setmetatable(L, name);
    return self;
}

lwb_box *lwb_new_box(lua_State *L, const lwb_noun *noun, int n_values)
{
    return lwb_new(L, noun, sizeof(lwb_box), n_values);
}

void *lwb_test(lua_State *L, int index, const lwb_noun *noun)
{
    char name[64];
    snprintf(name, sizeof name, PREFIX "%s", noun->name);
    return luaL_testudata(L, index, name);
}

const char *lwb_kind(lua_State *L, int index)
{
    if (lua_isnoneornil(L, index))
        return "nothing";
    if (lua_type(L, index) == LUA_TUSERDATA && luaL_getmetafield(L, index, "__name") == LUA_TSTRING) {
        const char *name = lua_tostring(L, -1); /* lives in the metatable */
        lua_pop(L, 1);
        return strncmp(name, PREFIX, sizeof PREFIX - 1) == 0 ? name + sizeof PREFIX - 1 : name;
    }
    return luaL_typename(L, index);
}

void *lwb_self(lua_State *L, int index, const lwb_noun *noun, const char *verb)
{
    void *self = lwb_test(L, index, noun);
    if (self != NULL)
        return self;
    bool method = strchr(verb, ':') != NULL && index == 1;
    lwb_refuse(L, method ? "call it with a colon" : NULL, "%s: wants a %s, not %s", verb, noun->name,
               lwb_kind(L, index));
    return NULL;
}

void *lwb_object(lua_State *L, int index, const lwb_noun *noun, const char *verb)
{
    lwb_box *box = lwb_self(L, index, noun, verb);
    if (box->object == NULL)
        lwb_refuse(L, "keep it open as long as it is used", "%s: the %s is closed", verb, noun->name);
    return box->object;
}

double lwb_number(lua_State *L, int index, const char *verb, const char *what)
{
    const lw_quantity *quantity = lwb_test_quantity(L, index);
    if (quantity != NULL && quantity->kind == LW_VALUE)
        return quantity->value;
    if (lua_type(L, index) != LUA_TNUMBER)
        lwb_refuse(L, NULL, "%s: %s must be a number, not %s", verb, what, lwb_kind(L, index));
    return lua_tonumber(L, index);
}

const char *lwb_text(lua_State *L, int index, const char *verb, const char *what)
{
    if (lua_type(L, index) != LUA_TSTRING)
        lwb_refuse(L, NULL, "%s: %s must be a text, not %s", verb, what, lwb_kind(L, index));
    return lua_tostring(L, index);
}

void lwb_want_table(lua_State *L, int index, const char *verb, const char *what)
{
    if (lua_type(L, index) != LUA_TTABLE)
        lwb_refuse(L, NULL, "%s: %s must be a table, not %s", verb, what, lwb_kind(L, index));
}

void lwb_only_keys(lua_State *L, int index, const char *verb, const char *const *keys)
{
    index = lua_absindex(L, index);
    for (lua_pushnil(L); lua_next(L, index); lua_pop(L, 1)) {
        if (lua_type(L, -2) != LUA_TSTRING)
            continue;
        const char *key = lua_tostring(L, -2);
        size_t i = 0;
        while (keys[i] != NULL && strcmp(keys[i], key) != 0)
            i++;
        if (keys[i] != NULL)
            continue;
        char list[300] = "", hint[400];
        size_t used = 0;
        for (i = 0; keys[i] != NULL && used + 1 < sizeof list; i++)
            used += (size_t)snprintf(list + used, sizeof list - used, "%s%s", i ? ", " : "", keys[i]);
        const char *near = lw_nearest(keys, key);
        snprintf(hint, sizeof hint, "%s%s%svalid: %s", near ? "did you mean '" : "", near ? near : "",
                 near ? "'? " : "", list);
        lwb_refuse(L, hint, "%s: unknown field '%s'", verb, key);
    }
}

static int raw_field(lua_State *L, int index, const char *key)
{
    index = lua_absindex(L, index);
    lua_pushstring(L, key);
    return lua_rawget(L, index);
}

double lwb_field_number(lua_State *L, int index, const char *key, const char *verb, double otherwise)
{
    double value = otherwise;
    if (raw_field(L, index, key) != LUA_TNIL)
        value = lwb_number(L, -1, verb, key);
    lua_pop(L, 1);
    return value;
}

const char *lwb_field_text(lua_State *L, int index, const char *key, const char *verb, const char *otherwise)
{
    const char *value = otherwise; /* the table keeps the string alive */
    if (raw_field(L, index, key) != LUA_TNIL)
        value = lwb_text(L, -1, verb, key);
    lua_pop(L, 1);
    return value;
}

bool lwb_field_flag(lua_State *L, int index, const char *key, const char *verb, bool otherwise)
{
    bool value = otherwise;
    int type = raw_field(L, index, key);
    if (type != LUA_TNIL && type != LUA_TBOOLEAN)
        lwb_refuse(L, NULL, "%s: '%s' must be true or false, not %s", verb, key, lwb_kind(L, -1));
    if (type == LUA_TBOOLEAN)
        value = lua_toboolean(L, -1);
    lua_pop(L, 1);
    return value;
}

static void read_list(lua_State *L, const lw_option *option, const char *verb, void *target, int list)
{
    lw_error err = LW_ERROR_NONE;
    ((lw_option_list *)((char *)target + option->offset))->n = 0; /* replaces the default */
    lua_Integer n = (lua_Integer)lua_rawlen(L, list);
    for (lua_Integer i = 1; i <= n; i++) {
        lua_rawgeti(L, list, i);
        const char *item = lwb_text(L, -1, verb, option->key); /* the list keeps it alive */
        lwb_check(L, lw_option_item(option, verb, target, item, &err), &err);
        lua_pop(L, 1);
    }
}

static void read_range(lua_State *L, const lw_option *option, const char *verb, void *target, int list)
{
    lw_error err = LW_ERROR_NONE;
    if (lua_rawlen(L, list) != 2)
        lwb_refuse(L, option->help, "%s: option '%s' wants a pair {low, high}", verb, option->key);
    lua_rawgeti(L, list, 1);
    lua_rawgeti(L, list, 2);
    double low = lwb_number(L, -2, verb, option->key), high = lwb_number(L, -1, verb, option->key);
    lua_pop(L, 2);
    lwb_check(L, lw_option_range(option, verb, target, low, high, &err), &err);
}

/* Nouns that may be given by name: the constructor of the same name is called with the text. */
static void read_noun(lua_State *L, const lw_option *option, const char *verb, void *target, int value)
{
    lw_error err = LW_ERROR_NONE;
    const lwb_noun *noun = NULL;
    for (size_t i = 0; lwb_noun_list[i] != NULL; i++)
        if (strcmp(lwb_noun_list[i]->name, option->unit) == 0)
            noun = lwb_noun_list[i];
    if (noun != NULL && lua_type(L, value) == LUA_TSTRING && noun->functions != NULL &&
        (noun == &lwb_radiation_noun || noun == &lwb_material_noun || noun == &lwb_standard_noun)) {
        lua_pushcfunction(L, noun->functions[0].func);
        lua_pushvalue(L, value);
        lua_call(L, 1, 1);
        value = lua_absindex(L, -1); /* stays on the stack, so it lives as long as the call */
    }
    void *self = noun != NULL ? lwb_test(L, value, noun) : NULL;
    if (self == NULL)
        lwb_refuse(L, option->help, "%s: option '%s' wants a %s, not %s", verb, option->key, option->unit,
                   lwb_kind(L, value));
    /* radiation, material and standard are held in the userdata itself, the others behind a pointer */
    bool inside = noun == &lwb_radiation_noun || noun == &lwb_material_noun || noun == &lwb_standard_noun;
    lwb_check(L, lw_option_noun(option, verb, target, inside ? self : ((lwb_box *)self)->object, &err), &err);
}

static void read_one(lua_State *L, const lw_option *option, const char *verb, void *target, int value)
{
    lw_error err = LW_ERROR_NONE;
    lw_status status = LW_OK;
    int type = lua_type(L, value);
    if (option->kind == LW_OPTION_NOUN)
        read_noun(L, option, verb, target, value);
    else if (type == LUA_TNUMBER || lwb_test_quantity(L, value) != NULL)
        status = lw_option_number(option, verb, target, lwb_number(L, value, verb, option->key), &err);
    else if (type == LUA_TBOOLEAN)
        status = lw_option_flag(option, verb, target, lua_toboolean(L, value), &err);
    else if (type == LUA_TSTRING && option->kind == LW_OPTION_LIST) {
        ((lw_option_list *)((char *)target + option->offset))->n = 0;
        status = lw_option_item(option, verb, target, lua_tostring(L, value), &err);
    } else if (type == LUA_TSTRING)
        status = lw_option_text(option, verb, target, lua_tostring(L, value), &err);
    else if (type == LUA_TTABLE && option->kind == LW_OPTION_LIST)
        read_list(L, option, verb, target, value);
    else if (type == LUA_TTABLE && option->kind == LW_OPTION_RANGE)
        read_range(L, option, verb, target, value);
    else
        lwb_refuse(L, option->help, "%s: option '%s' can't be a %s", verb, option->key, lwb_kind(L, value));
    lwb_check(L, status, &err);
}

void lwb_options(lua_State *L, int index, const char *verb, const lw_option *table, const char *const *own,
                 void *target)
{
    static const lw_option none[] = {LW_OPTIONS_END};
    if (table == NULL)
        table = none;
    lw_error err = LW_ERROR_NONE;
    if (!lua_isnoneornil(L, index)) {
        lwb_want_table(L, index, verb, "the options");
        index = lua_absindex(L, index);
        lua_pushnil(L);
        int key_at = lua_gettop(L);
        while (lua_next(L, index)) {
            luaL_checkstack(L, 8, NULL);
            if (lua_type(L, key_at) != LUA_TSTRING)
                lwb_refuse(L, "write key = value", "%s: options are named, this one is not", verb);
            const char *key = lua_tostring(L, key_at);
            size_t mine = 0;
            while (own != NULL && own[mine] != NULL && strcmp(own[mine], key) != 0)
                mine++;
            if (own == NULL || own[mine] == NULL) {
                const lw_option *option = lw_option_find(table, verb, key, &err);
                if (option == NULL)
                    lwb_raise(L, &err);
                read_one(L, option, verb, target, key_at + 1);
            }
            /* what a noun's name made is kept below the key: move it there */
            int made = lua_gettop(L) - (key_at + 1);
            if (made > 0) {
                lua_rotate(L, key_at, made);
                key_at += made;
            }
            lua_settop(L, key_at);
        }
    }
    for (const lw_option *option = table; option->key != NULL; option++) {
        if (strcmp(option->standard, "required") != 0)
            continue;
        int type = lua_isnoneornil(L, index) ? LUA_TNIL : raw_field(L, index, option->key);
        if (type == LUA_TNIL)
            lwb_refuse(L, option->help, "%s: option '%s' must be given", verb, option->key);
        lua_pop(L, 1);
    }
}
