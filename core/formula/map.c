#include "core/formula/map.h"

#include <string.h>

#include "core/base/memory.h"

static size_t place(const mt_map *map, const mt_expr *e) {
    size_t i = (size_t)(e->hash * 0x9E3779B97F4A7C15u) & (map->room - 1);
    while (map->key[i] && map->key[i] != e) i = (i + 1) & (map->room - 1);
    return i;
}

static bool grow(mt_map *map) {
    mt_map more = {.n = map->n, .room = map->room ? 2 * map->room : 64};
    more.key = mt_alloc(more.room, sizeof *more.key);
    more.value = mt_alloc(more.room, sizeof *more.value);
    if (!more.key || !more.value) {
        mt_map_end(&more);
        return false;
    }
    for (size_t i = 0; i < map->room; i++)
        if (map->key[i]) {
            size_t j = place(&more, map->key[i]);
            more.key[j] = map->key[i];
            more.value[j] = map->value[i];
        }
    mt_map_end(map);
    *map = more;
    return true;
}

uintptr_t *mt_map_at(mt_map *map, const mt_expr *e, bool make) {
    if (make && 2 * (map->n + 1) > map->room && !grow(map)) return NULL;
    if (!map->room) return NULL;
    size_t i = place(map, e);
    if (!map->key[i]) {
        if (!make) return NULL;
        map->key[i] = e;
        map->n++;
    }
    return &map->value[i];
}

void mt_map_end(mt_map *map) {
    mt_free(map->key);
    mt_free(map->value);
    memset(map, 0, sizeof *map);
}
