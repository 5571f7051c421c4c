/* SPDX-License-Identifier: GPL-3.0-or-later */
/* quantity: value, standard uncertainty, unit. Arithmetic propagates to first order (JCGM 100:2008,
 * 5.1.2) and takes two operands as independent, but for one object used twice: q - q is exactly 0.
 * Results of one fit are correlated; a method that needs their covariance computes inside the engine. */
#include "bind/bind.h"

#include <math.h>
#include <stdio.h>
#include <string.h>

#define UNIT_MOST 48

typedef struct box {
    lw_quantity quantity; /* its unit points to the array below */
    char unit[UNIT_MOST];
} box;

void lwb_push_quantity(lua_State *L, lw_quantity quantity)
{
    box *self = lwb_new(L, &lwb_quantity_noun, sizeof *self, 0);
    self->quantity = quantity;
    snprintf(self->unit, sizeof self->unit, "%s", quantity.unit ? quantity.unit : "");
    self->quantity.unit = self->unit;
}

const lw_quantity *lwb_test_quantity(lua_State *L, int index)
{
    box *self = lwb_test(L, index, &lwb_quantity_noun);
    return self ? &self->quantity : NULL;
}

/* lw.quantity{18.4, 0.6, "nm"} or {value =, u =, unit =} */
static int make(lua_State *L)
{
    static const char *const keys[] = {"value", "u", "unit", NULL};
    lwb_want_table(L, 1, "quantity", "the argument");
    lwb_only_keys(L, 1, "quantity", keys);
    lua_settop(L, 1);
    for (int i = 0; i < 3; i++) {
        lua_rawgeti(L, 1, i + 1);
        if (lua_isnil(L, -1)) {
            lua_pop(L, 1);
            lua_pushstring(L, keys[i]);
            lua_rawget(L, 1);
        }
    }
    double value = lwb_number(L, 2, "quantity", "the value");
    double u = lua_isnil(L, 3) ? 0 : lwb_number(L, 3, "quantity", "the uncertainty");
    const char *unit = lua_isnil(L, 4) ? "" : lwb_text(L, 4, "quantity", "the unit");
    if (!(u >= 0))
        return lwb_refuse(L, "give a standard uncertainty of 0 or more", "quantity: the uncertainty is %g", u);
    if (strlen(unit) >= UNIT_MOST)
        return lwb_refuse(L, NULL, "quantity: the unit is longer than %d bytes", UNIT_MOST - 1);
    lwb_push_quantity(L, lw_quantity_of(value, u, unit));
    return 1;
}

/* An operand: a quantity that is a value, or a plain number, exact and without unit. */
static lw_quantity operand(lua_State *L, int index, const char *verb)
{
    const lw_quantity *quantity = lwb_test_quantity(L, index);
    if (quantity != NULL && quantity->kind != LW_VALUE)
        lwb_refuse(L, "a limit has no value to compute with", "quantity %s: an operand is a limit", verb);
    if (quantity != NULL)
        return *quantity;
    return lw_quantity_of(lwb_number(L, index, "quantity", "the other operand"), 0, "");
}

static bool same(lua_State *L)
{
    return lua_rawequal(L, 1, 2);
}

static void want_one_unit(lua_State *L, lw_quantity a, lw_quantity b, const char *verb)
{
    if (strcmp(a.unit, b.unit) != 0)
        lwb_refuse(L, "bring both to one unit", "quantity %s: units differ, '%s' and '%s'", verb, a.unit, b.unit);
}

static int sum(lua_State *L, int sign, const char *verb)
{
    lw_quantity a = operand(L, 1, verb), b = operand(L, 2, verb);
    want_one_unit(L, a, b, verb);
    double u = same(L) ? fabs(1.0 + sign) * a.u : hypot(a.u, b.u);
    lwb_push_quantity(L, lw_quantity_of(a.value + sign * b.value, u, a.unit));
    return 1;
}

static int add(lua_State *L)
{
    return sum(L, 1, "+");
}

static int subtract(lua_State *L)
{
    return sum(L, -1, "-");
}

static int product(lua_State *L, int sign)
{
    const char *verb = sign > 0 ? "*" : "/";
    lw_quantity a = operand(L, 1, verb), b = operand(L, 2, verb);
    char unit[UNIT_MOST];
    if (!lwb_unit_product(a.unit, b.unit, sign, unit, sizeof unit))
        return lwb_refuse(L, NULL, "quantity %s: the unit grows too long", verb);
    double value = sign > 0 ? a.value * b.value : a.value / b.value;
    double by_a = sign > 0 ? b.value : 1 / b.value;
    double by_b = sign > 0 ? a.value : -a.value / (b.value * b.value);
    double u = same(L) ? fabs(by_a + by_b) * a.u : hypot(by_a * a.u, by_b * b.u);
    lwb_push_quantity(L, lw_quantity_of(value, u, unit));
    return 1;
}

static int multiply(lua_State *L)
{
    return product(L, 1);
}

static int divide(lua_State *L)
{
    return product(L, -1);
}

static int raise_to(lua_State *L)
{
    lw_quantity a = operand(L, 1, "^");
    double power = lwb_number(L, 2, "quantity ^", "the exponent");
    if (lwb_test_quantity(L, 2) != NULL)
        return lwb_refuse(L, NULL, "quantity ^: the exponent must be a plain number");
    char unit[UNIT_MOST];
    if (!lwb_unit_power(a.unit, power, unit, sizeof unit))
        return lwb_refuse(L, NULL, "quantity ^: the power %g of the unit '%s' is not a unit", power, a.unit);
    double u = power == 0 ? 0 : fabs(power * pow(a.value, power - 1)) * a.u;
    lwb_push_quantity(L, lw_quantity_of(pow(a.value, power), u, unit));
    return 1;
}

static int negate(lua_State *L)
{
    lw_quantity a = operand(L, 1, "-");
    a.value = -a.value;
    lwb_push_quantity(L, a);
    return 1;
}

/* Equal in every part: the same statement, not the same true value. */
static int equal(lua_State *L)
{
    const lw_quantity *a = lwb_test_quantity(L, 1), *b = lwb_test_quantity(L, 2);
    lua_pushboolean(L, a != NULL && b != NULL && a->value == b->value && a->u == b->u && a->kind == b->kind &&
                           strcmp(a->unit, b->unit) == 0);
    return 1;
}

static int less(lua_State *L)
{
    lw_quantity a = operand(L, 1, "<"), b = operand(L, 2, "<");
    want_one_unit(L, a, b, "<");
    lua_pushboolean(L, a.value < b.value);
    return 1;
}

static int less_equal(lua_State *L)
{
    lw_quantity a = operand(L, 1, "<="), b = operand(L, 2, "<=");
    want_one_unit(L, a, b, "<=");
    lua_pushboolean(L, a.value <= b.value);
    return 1;
}

static int show(lua_State *L)
{
    char text[128];
    const box *self = lwb_self(L, 1, &lwb_quantity_noun, "tostring");
    lua_pushstring(L, lw_quantity_text(self->quantity, text, sizeof text));
    return 1;
}

static int join(lua_State *L)
{
    luaL_tolstring(L, 1, NULL);
    luaL_tolstring(L, 2, NULL);
    lua_concat(L, 2);
    return 1;
}

/* q:pull(other): difference over combined standard uncertainty, both taken as independent. */
static int pull(lua_State *L)
{
    lwb_self(L, 1, &lwb_quantity_noun, "quantity:pull");
    lw_quantity a = operand(L, 1, "pull"), b = operand(L, 2, "pull");
    if (lwb_test_quantity(L, 2) == NULL)
        b.unit = a.unit; /* a plain number is a nominal value in the quantity's own unit */
    want_one_unit(L, a, b, "pull");
    double u = hypot(a.u, b.u);
    if (!(u > 0))
        return lwb_refuse(L, "one of them needs an uncertainty", "quantity:pull: both are exact");
    lua_pushnumber(L, (a.value - b.value) / u);
    return 1;
}

static bool field(lua_State *L, const char *key)
{
    const lw_quantity *q = lwb_test_quantity(L, 1);
    if (strcmp(key, "value") == 0)
        lua_pushnumber(L, q->value);
    else if (strcmp(key, "u") == 0)
        lua_pushnumber(L, q->u);
    else if (strcmp(key, "unit") == 0)
        lua_pushstring(L, q->unit);
    else if (strcmp(key, "kind") == 0)
        lua_pushstring(L, q->kind == LW_VALUE ? "value" : q->kind == LW_LOWER_LIMIT ? "lower limit" : "upper limit");
    else if (strcmp(key, "confidence") == 0)
        lua_pushnumber(L, q->confidence);
    else
        return false;
    return true;
}

static const char *const fields[] = {"value", "u", "unit", "kind", "confidence", NULL};
static const luaL_Reg functions[] = {{"quantity", make}, {NULL, NULL}};
static const luaL_Reg methods[] = {{"pull", pull}, {NULL, NULL}};
static const luaL_Reg metamethods[] = {{"__add", add},   {"__sub", subtract}, {"__mul", multiply}, {"__div", divide},
                                       {"__pow", raise_to}, {"__unm", negate}, {"__eq", equal},    {"__lt", less},
                                       {"__le", less_equal}, {"__tostring", show}, {"__concat", join}, {NULL, NULL}};

const lwb_noun lwb_quantity_noun = {.name = "quantity",
                                    .functions = functions,
                                    .methods = methods,
                                    .metamethods = metamethods,
                                    .fields = fields,
                                    .field = field};
