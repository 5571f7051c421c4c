/* SPDX-License-Identifier: GPL-3.0-or-later */
/* vector: contiguous doubles that never change. Either its own numbers, or a view into an object that
 * it keeps alive; a slice is a view. */
#include "bind/bind.h"

#include <math.h>
#include <stdint.h>
#include <stdio.h>
#include <string.h>

typedef struct vector {
    const double *x;
    size_t n;
    double own[]; /* empty for a view */
} vector;

double *lwb_new_vector(lua_State *L, size_t n)
{
    if (n > (SIZE_MAX / 4) / sizeof(double))
        lwb_refuse(L, NULL, "vector: %zu numbers are too many", n);
    vector *self = lwb_new(L, &lwb_vector_noun, sizeof *self + n * sizeof(double), 0);
    self->x = self->own;
    self->n = n;
    return self->own;
}

void lwb_push_vector(lua_State *L, const double *x, size_t n, int owner)
{
    owner = lua_absindex(L, owner);
    vector *self = lwb_new(L, &lwb_vector_noun, sizeof *self, 1);
    self->x = x;
    self->n = n;
    lua_pushvalue(L, owner);
    lua_setiuservalue(L, -2, 1);
}

const double *lwb_to_vector(lua_State *L, int index, const char *verb, const char *what, size_t *n)
{
    index = lua_absindex(L, index);
    const vector *given = lwb_test(L, index, &lwb_vector_noun);
    if (given != NULL) {
        lua_pushvalue(L, index);
        *n = given->n;
        return given->x;
    }
    if (lua_type(L, index) != LUA_TTABLE)
        lwb_refuse(L, NULL, "%s: %s must be a vector or a list of numbers, not %s", verb, what, lwb_kind(L, index));
    *n = (size_t)lua_rawlen(L, index);
    double *x = lwb_new_vector(L, *n);
    for (size_t i = 0; i < *n; i++) {
        lua_rawgeti(L, index, (lua_Integer)i + 1);
        x[i] = lwb_number(L, -1, verb, what);
        lua_pop(L, 1);
    }
    return x;
}

static vector *self_of(lua_State *L, const char *verb)
{
    return lwb_self(L, 1, &lwb_vector_noun, verb);
}

static int make(lua_State *L)
{
    size_t n = 0;
    lwb_to_vector(L, 1, "vector", "the argument", &n);
    return 1;
}

typedef double operation(double a, double b);

static double op_add(double a, double b)
{
    return a + b;
}
static double op_subtract(double a, double b)
{
    return a - b;
}
static double op_multiply(double a, double b)
{
    return a * b;
}
static double op_divide(double a, double b)
{
    return a / b;
}

/* Element by element; a plain number meets every element. */
static int combine(lua_State *L, operation *op, const char *verb)
{
    const vector *a = lwb_test(L, 1, &lwb_vector_noun), *b = lwb_test(L, 2, &lwb_vector_noun);
    double plain_a = a ? 0 : lwb_number(L, 1, verb, "the other operand");
    double plain_b = b ? 0 : lwb_number(L, 2, verb, "the other operand");
    if (a != NULL && b != NULL && a->n != b->n)
        return lwb_refuse(L, NULL, "%s: lengths differ, %zu and %zu", verb, a->n, b->n);
    size_t n = a ? a->n : b->n;
    double *out = lwb_new_vector(L, n);
    for (size_t i = 0; i < n; i++)
        out[i] = op(a ? a->x[i] : plain_a, b ? b->x[i] : plain_b);
    return 1;
}

static int add(lua_State *L)
{
    return combine(L, op_add, "vector +");
}
static int subtract(lua_State *L)
{
    return combine(L, op_subtract, "vector -");
}
static int multiply(lua_State *L)
{
    return combine(L, op_multiply, "vector *");
}
static int divide(lua_State *L)
{
    return combine(L, op_divide, "vector /");
}
static int raise_to(lua_State *L)
{
    return combine(L, pow, "vector ^");
}

static int negate(lua_State *L)
{
    const vector *a = self_of(L, "vector -");
    double *out = lwb_new_vector(L, a->n);
    for (size_t i = 0; i < a->n; i++)
        out[i] = -a->x[i];
    return 1;
}

static int length(lua_State *L)
{
    lua_pushinteger(L, (lua_Integer)self_of(L, "#vector")->n);
    return 1;
}

static int equal(lua_State *L)
{
    const vector *a = lwb_test(L, 1, &lwb_vector_noun), *b = lwb_test(L, 2, &lwb_vector_noun);
    bool same = a != NULL && b != NULL && a->n == b->n;
    for (size_t i = 0; same && i < a->n; i++)
        same = a->x[i] == b->x[i];
    lua_pushboolean(L, same);
    return 1;
}

static int show(lua_State *L)
{
    const vector *a = self_of(L, "tostring");
    luaL_Buffer text;
    char number[40];
    luaL_buffinit(L, &text);
    snprintf(number, sizeof number, "vector of %zu: ", a->n);
    luaL_addstring(&text, number);
    for (size_t i = 0; i < a->n; i++) {
        if (a->n > 8 && i == 5) {
            luaL_addstring(&text, ", ...");
            i = a->n - 1;
        }
        snprintf(number, sizeof number, "%s%.8g", i > 0 ? ", " : "", a->x[i]);
        luaL_addstring(&text, number);
    }
    luaL_pushresult(&text);
    return 1;
}

/* v:slice(first, last): counted from 1, both included, negative from the end. */
static int slice(lua_State *L)
{
    const vector *a = self_of(L, "vector:slice");
    lua_Integer n = (lua_Integer)a->n;
    lua_Integer first = luaL_checkinteger(L, 2), last = luaL_optinteger(L, 3, n);
    if (first < 0)
        first += n + 1;
    if (last < 0)
        last += n + 1;
    if (first < 1 || last > n)
        return lwb_refuse(L, NULL, "vector:slice: %lld to %lld is outside 1 to %lld", (long long)first, (long long)last,
                          (long long)n);
    size_t count = last >= first ? (size_t)(last - first + 1) : 0;
    lwb_push_vector(L, a->x + (first - 1), count, 1);
    return 1;
}

/* v:map(f): f is called with each number and its index. */
static int map(lua_State *L)
{
    const vector *a = self_of(L, "vector:map");
    luaL_checktype(L, 2, LUA_TFUNCTION);
    lua_settop(L, 2);
    double *out = lwb_new_vector(L, a->n);
    for (size_t i = 0; i < a->n; i++) {
        lua_pushvalue(L, 2);
        lua_pushnumber(L, a->x[i]);
        lua_pushinteger(L, (lua_Integer)i + 1);
        lua_call(L, 2, 1);
        out[i] = lwb_number(L, -1, "vector:map", "what the function returns");
        lua_pop(L, 1);
    }
    return 1;
}

static int table(lua_State *L)
{
    const vector *a = self_of(L, "vector:table");
    lua_createtable(L, a->n < INT32_MAX ? (int)a->n : 0, 0);
    for (size_t i = 0; i < a->n; i++) {
        lua_pushnumber(L, a->x[i]);
        lua_rawseti(L, -2, (lua_Integer)i + 1);
    }
    return 1;
}

/* Sum with the error of each addition carried along (Neumaier 1974 ZAMM 54, 39). */
static double total(const vector *a)
{
    double sum = 0, rest = 0;
    for (size_t i = 0; i < a->n; i++) {
        double next = sum + a->x[i];
        rest += fabs(sum) >= fabs(a->x[i]) ? (sum - next) + a->x[i] : (a->x[i] - next) + sum;
        sum = next;
    }
    return sum + rest;
}

static int add_up(lua_State *L)
{
    lua_pushnumber(L, total(self_of(L, "vector:sum")));
    return 1;
}

static const vector *not_empty(lua_State *L, const char *verb)
{
    const vector *a = self_of(L, verb);
    if (a->n == 0)
        lwb_refuse(L, NULL, "%s: the vector is empty", verb);
    return a;
}

static int mean(lua_State *L)
{
    const vector *a = not_empty(L, "vector:mean");
    lua_pushnumber(L, total(a) / (double)a->n);
    return 1;
}

/* The extreme and the index where it is first met. */
static int extreme(lua_State *L, bool most, const char *verb)
{
    const vector *a = not_empty(L, verb);
    size_t best = 0;
    for (size_t i = 1; i < a->n; i++)
        if (most ? a->x[i] > a->x[best] : a->x[i] < a->x[best])
            best = i;
    lua_pushnumber(L, a->x[best]);
    lua_pushinteger(L, (lua_Integer)best + 1);
    return 2;
}

static int smallest(lua_State *L)
{
    return extreme(L, false, "vector:min");
}
static int largest(lua_State *L)
{
    return extreme(L, true, "vector:max");
}

static int dot(lua_State *L)
{
    const vector *a = self_of(L, "vector:dot"), *b = lwb_self(L, 2, &lwb_vector_noun, "vector:dot");
    if (a->n != b->n)
        return lwb_refuse(L, NULL, "vector:dot: lengths differ, %zu and %zu", a->n, b->n);
    double sum = 0;
    for (size_t i = 0; i < a->n; i++)
        sum += a->x[i] * b->x[i];
    lua_pushnumber(L, sum);
    return 1;
}

/* v[i] is nil outside, so that ipairs works; v.name is a method or an error. Upvalue 1: methods. */
static int at(lua_State *L)
{
    const vector *a = self_of(L, "vector");
    if (lua_type(L, 2) == LUA_TNUMBER) {
        lua_Integer i = lua_tointeger(L, 2);
        if (i >= 1 && i <= (lua_Integer)a->n)
            lua_pushnumber(L, a->x[i - 1]);
        else
            lua_pushnil(L);
        return 1;
    }
    lua_pushvalue(L, 2);
    if (lua_rawget(L, lua_upvalueindex(1)) == LUA_TNIL)
        return lwb_refuse(L, NULL, "a vector has no method '%s'", lua_type(L, 2) == LUA_TSTRING ? lua_tostring(L, 2) : "?");
    return 1;
}

static const luaL_Reg functions[] = {{"vector", make}, {NULL, NULL}};
static const luaL_Reg methods[] = {{"slice", slice}, {"map", map},      {"table", table},  {"sum", add_up}, {"mean", mean},
                                   {"min", smallest}, {"max", largest}, {"dot", dot}, {NULL, NULL}};
static const luaL_Reg metamethods[] = {{"__index", at},     {"__add", add},    {"__sub", subtract}, {"__mul", multiply},
                                       {"__div", divide},   {"__pow", raise_to}, {"__unm", negate},  {"__len", length},
                                       {"__eq", equal}, {"__tostring", show}, {NULL, NULL}};

const lwb_noun lwb_vector_noun = {
    .name = "vector", .functions = functions, .methods = methods, .metamethods = metamethods};
