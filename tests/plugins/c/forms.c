/* A plugin library in C for tests: a ring, a model with callbacks, one with factors, an update rule and an observable. */
#include <stddef.h>
#include "spinledger.h"
#include <stdlib.h>
#include <string.h>

#define PARAMETER(name, kind, more) "{\"name\":\"" name "\",\"kind\":" kind "," more "\"about\":\"For tests.\"}"
#define HEAD(kind, name) "{\"kind\":\"" kind "\",\"name\":\"" name "\",\"revision\":1,\"about\":\"For tests, in C.\","

SPINLEDGER_MANIFEST(
    "{\"interface\":1,\"library\":\"test-c-forms\",\"version\":\"0.1.0\",\"licence\":\"MIT OR Apache-2.0\",\"items\":["
    HEAD("lattice", "c-ring") "\"parameters\":[" PARAMETER("size", "{\"integer\":{\"min\":3}}", "\"required\":true,") "],"
    "\"lattice\":{\"dimension\":1,\"size\":\"size\",\"classes\":[\"first\"]}},"
    HEAD("model", "c-triple") "\"parameters\":[" PARAMETER("triple", "{\"number\":{}}", "\"default\":0.5,") "],"
    "\"model\":{\"forms\":[\"pair\",\"custom\"],\"states\":2,\"offers\":[{\"name\":\"scalar\"}]}},"
    HEAD("model", "c-factor") "\"parameters\":[" PARAMETER("triple", "{\"number\":{}}", "\"default\":0.5,") "],"
    "\"model\":{\"forms\":[\"pair\",\"factors\"],\"states\":2,\"offers\":[{\"name\":\"scalar\"}]}},"
    HEAD("update", "c-heat-bath") "\"update\":{\"forms\":[\"pair\",\"custom\"],\"most_states\":2}},"
    HEAD("observable", "c-mean") "\"observable\":{\"needs\":[\"scalar\"],\"columns\":[{\"name\":\"c_mean\",\"invariant\":false}]}}"
    "]}");

static int32_t fail(SlMessage *message, const char *text) {
    size_t length = strlen(text);
    if (length > message->capacity) length = message->capacity;
    memcpy(message->data, text, length);
    message->length = length;
    return SL_FAILED;
}

/* The number of a parameter, of either kind of number. */
static int number(const SlValue *parameters, const char *name, double *out) {
    for (size_t k = 0; k < parameters->count; k++) {
        const SlValue *value = &parameters->items[k];
        if (value->key.length == strlen(name) && memcmp(value->key.data, name, value->key.length) == 0) {
            *out = value->number;
            return value->kind == SL_VALUE_NUMBER || value->kind == SL_VALUE_INTEGER;
        }
    }
    return 0;
}

/* Both the lattice and the models keep one number. */
typedef struct {
    double number;
} Item;

static int32_t create_from(const SlValue *parameters, const char *name, void **item, SlMessage *message) {
    double value;
    if (!number(parameters, name, &value)) return fail(message, "a parameter is missing");
    Item *made = malloc(sizeof *made);
    if (made == NULL) return fail(message, "out of memory");
    made->number = value;
    *item = made;
    return SL_OK;
}

/* ---- lattice ---- */

static int32_t ring_create(const SlHost *host, const SlValue *parameters, void **item, SlMessage *message) {
    (void)host;
    return create_from(parameters, "size", item, message);
}

static int32_t ring_build(const void *lattice, const SlLatticeSink *sink, SlMessage *message) {
    uint32_t n = (uint32_t)((const Item *)lattice)->number;
    double vector = 1.0;
    int64_t cells = n;
    uint8_t periodic = 1;
    int32_t status = sink->geometry(sink->context, 1, &vector, &cells, &periodic);
    for (uint32_t s = 0; s < n && status == SL_OK; s++) {
        double position = s;
        uint32_t sublattice = 0;
        status = sink->sites(sink->context, 1, &position, &sublattice);
    }
    SlText name = SL_TEXT("first");
    if (status == SL_OK) status = sink->class_name(sink->context, name);
    for (uint32_t s = 0; s < n && status == SL_OK; s++) {
        SlBond bond = { s, (s + 1) % n, 0, 1, 0 };
        int32_t wrap = s + 1 == n;
        status = sink->bonds(sink->context, 1, &bond, &wrap);
    }
    if (status == SL_FAILED) return fail(message, "the host refused the ring");
    return status;
}

static const SlLattice ring = { sizeof(SlLattice), ring_create, free, ring_build };

/* ---- models: H = -sum s s - K sum s s s over sites that follow each other ---- */

static int32_t triple_create(const SlHost *host, const SlValue *parameters, void **item, SlMessage *message) {
    (void)host;
    return create_from(parameters, "triple", item, message);
}

static int32_t pairs(const SlGraph *graph, const SlModelSink *sink) {
    static const double values[2] = { 1.0, -1.0 }, energies[4] = { -1.0, 1.0, 1.0, -1.0 };
    static const uint8_t negation[2] = { 1, 0 };
    int32_t status = sink->spins(sink->context, 2, values, negation, 0, 1);
    for (uint32_t c = 0; c < graph->classes && status == SL_OK; c++) status = sink->pair(sink->context, c, energies);
    return status;
}

static int32_t triple_describe(const void *model, const SlGraph *graph, const SlModelSink *sink, SlMessage *message) {
    (void)model;
    if (graph->sites < 3) return fail(message, "the lattice must have three sites");
    int32_t status = pairs(graph, sink);
    return status == SL_OK ? sink->custom(sink->context) : status;
}

static int32_t factor_describe(const void *model, const SlGraph *graph, const SlModelSink *sink, SlMessage *message) {
    double k = ((const Item *)model)->number, energies[8];
    if (graph->sites < 3) return fail(message, "the lattice must have three sites");
    for (uint32_t states = 0; states < 8; states++) {
        uint32_t down = (states & 1) + (states >> 1 & 1) + (states >> 2 & 1);
        energies[states] = down % 2 == 0 ? -k : k;
    }
    int32_t status = pairs(graph, sink);
    if (status == SL_OK) status = sink->factor_table(sink->context, 3, energies);
    for (uint32_t s = 0; s < graph->sites && status == SL_OK; s++) {
        uint32_t sites[3] = { s, (s + 1) % graph->sites, (s + 2) % graph->sites };
        status = sink->factors(sink->context, 0, 1, sites);
    }
    return status;
}

static int32_t triple_footprint(const void *model, const SlGraph *graph, uint32_t site, const SlSiteSink *sink,
                                SlMessage *message) {
    uint32_t n = graph->sites, sites[4] = { (site + 1) % n, (site + 2) % n, (site + n - 1) % n, (site + n - 2) % n };
    (void)model;
    (void)message;
    return sink->sites(sink->context, 4, sites);
}

static double spin(const SlView *view, size_t site) {
    return 1.0 - 2.0 * ((const uint8_t *)view->data)[site * view->stride];
}

static double term(const SlView *view, uint32_t n, uint32_t first) {
    return spin(view, first) * spin(view, (first + 1) % n) * spin(view, (first + 2) % n);
}

static int32_t triple_total(const void *model, const SlGraph *graph, const SlView *view, double *energy,
                            SlMessage *message) {
    double sum = 0.0;
    if (view->kind != SL_VIEW_BYTES) return fail(message, "only bytes are read");
    for (uint32_t s = 0; s < graph->sites; s++) sum += term(view, graph->sites, s);
    *energy = -((const Item *)model)->number * sum;
    return SL_OK;
}

static int32_t triple_delta(const void *model, const SlGraph *graph, const SlView *view, size_t count,
                            const uint32_t *sites, const void *proposals, double *changes, SlMessage *message) {
    uint32_t n = graph->sites;
    if (view->kind != SL_VIEW_BYTES) return fail(message, "only bytes are read");
    for (size_t k = 0; k < count; k++) {
        uint32_t s = sites[k];
        double sum = term(view, n, s) + term(view, n, (s + n - 1) % n) + term(view, n, (s + n - 2) % n);
        int flips = ((const uint8_t *)proposals)[k] != ((const uint8_t *)view->data)[s * view->stride];
        changes[k] = flips ? 2.0 * ((const Item *)model)->number * sum : 0.0;
    }
    return SL_OK;
}

static const SlModel triple = { sizeof(SlModel), triple_create,    free,         triple_describe,
                                triple_footprint, triple_total,    triple_delta };
static const SlModel factor = { sizeof(SlModel), triple_create, free, factor_describe, NULL, NULL, NULL };

/* ---- update rule: one chain, sites in order, pairs and callbacks ---- */

typedef struct {
    const SlHost *host;
    const SlGraph *graph;
    const SlEnergy *energy;
    double beta;
    SlStream stream;
    uint8_t states[];
} Chain;

static int32_t rule_create(const SlHost *host, const SlValue *parameters, void **item, SlMessage *message) {
    (void)host;
    (void)parameters;
    *item = malloc(1);
    return *item == NULL ? fail(message, "out of memory") : SL_OK;
}

static int32_t rule_prepare(const void *rule, const SlPrepare *prepare, void **instance, SlMessage *message) {
    (void)rule;
    if (prepare->lanes != 1) return fail(message, "one chain at a time");
    if (prepare->energy->states != 2 || prepare->energy->pair_tables == NULL) return fail(message, "two states, in pairs");
    Chain *chain = calloc(1, sizeof *chain + prepare->graph->total);
    if (chain == NULL) return fail(message, "out of memory");
    chain->host = prepare->host;
    chain->graph = prepare->graph;
    chain->energy = prepare->energy;
    chain->beta = prepare->inverse_temperature;
    prepare->host->open_stream(prepare->host->context, prepare->lane_keys, &chain->stream);
    *instance = chain;
    return SL_OK;
}

static int32_t rule_import(void *instance, size_t lane, const SlView *view, SlMessage *message) {
    Chain *chain = instance;
    (void)lane;
    if (view->kind != SL_VIEW_BYTES) return fail(message, "only bytes are read");
    for (size_t s = 0; s < view->sites; s++) chain->states[s] = ((const uint8_t *)view->data)[s * view->stride];
    return SL_OK;
}

static int32_t rule_export(const void *instance, size_t lane, const SlSpins *spins, SlMessage *message) {
    (void)lane;
    (void)message;
    memcpy(spins->states, ((const Chain *)instance)->states, spins->sites);
    return SL_OK;
}

static int32_t rule_view(void *instance, size_t lane, SlView *view, SlMessage *message) {
    Chain *chain = instance;
    (void)lane;
    (void)message;
    size_t total = chain->graph->total;
    SlView shown = { sizeof shown, SL_VIEW_BYTES, 0, total, 1, 0, 0, NULL, chain->states, total };
    *view = shown;
    return SL_OK;
}

static int32_t rule_sweep(void *instance, uint64_t count, SlMessage *message) {
    Chain *chain = instance;
    const SlGraph *graph = chain->graph;
    const SlEnergy *energy = chain->energy;
    SlView view;
    rule_view(instance, 0, &view, message);
    for (; count > 0; count--) {
        for (uint32_t s = 0; s < graph->sites; s++) {
            uint8_t now = chain->states[s], then = 1 - now;
            double change = 0.0;
            for (uint32_t k = graph->offsets[s]; k < graph->offsets[s + 1]; k++) {
                const double *table = energy->pair_tables + 4 * energy->neighbour_tables[k];
                uint8_t other = chain->states[graph->neighbours[k]];
                double strength = energy->neighbour_strengths == NULL ? 1.0 : energy->neighbour_strengths[k];
                change += strength * (table[2 * then + other] - table[2 * now + other]);
            }
            if (energy->custom != NULL) {
                double added = 0.0;
                const SlCustom *custom = energy->custom;
                int32_t status = custom->delta(custom->model, graph, &view, 1, &s, &then, &added, message);
                if (status != SL_OK) return status;
                change += added;
            }
            uint64_t word;
            chain->host->fill(chain->host->context, &chain->stream, &word, 1);
            /* The word's high 53 bits, in units of 2^-53. */
            if ((double)(word >> 11) * 0x1p-53 < 1.0 / (1.0 + chain->host->exp(chain->beta * change))) {
                chain->states[s] = then;
            }
        }
    }
    return SL_OK;
}

static int32_t rule_save(const void *instance, const SlByteSink *sink, SlMessage *message) {
    const Chain *chain = instance;
    (void)message;
    int32_t status = sink->write(sink->context, (const uint8_t *)&chain->stream, sizeof chain->stream);
    return status == SL_OK ? sink->write(sink->context, chain->states, chain->graph->total) : status;
}

static int32_t rule_restore(void *instance, const uint8_t *data, size_t count, SlMessage *message) {
    Chain *chain = instance;
    if (count != sizeof chain->stream + chain->graph->total) return fail(message, "the state has another length");
    memcpy(&chain->stream, data, sizeof chain->stream);
    memcpy(chain->states, data + sizeof chain->stream, chain->graph->total);
    return SL_OK;
}

/* As large as it was before `path`: libraries that were built then go on to load. */
static const SlUpdate heat_bath = { offsetof(SlUpdate, path), rule_create, free, rule_prepare, free, rule_import, rule_export,
                                     rule_sweep, rule_view, NULL, rule_save, rule_restore, NULL, NULL };

/* ---- observable: the mean, from bytes ---- */

typedef struct {
    size_t sites;
} Mean;

static int32_t mean_prepare(const void *observable, const SlHost *host, const SlGraph *graph, const SlEnergy *energy,
                            void **instance, SlMessage *message) {
    (void)observable;
    (void)host;
    if (energy->states != 2) return fail(message, "two states");
    Mean *mean = malloc(sizeof *mean);
    if (mean == NULL) return fail(message, "out of memory");
    mean->sites = graph->sites;
    *instance = mean;
    return SL_OK;
}

static int32_t mean_columns(const void *instance, const SlColumnSink *sink, SlMessage *message) {
    SlText name = SL_TEXT("c_mean"), unit = { NULL, 0 };
    (void)instance;
    (void)message;
    return sink->column(sink->context, name, unit, 0, 1);
}

static int32_t mean_measure(void *instance, const SlView *views, const SlTallies *tallies, double *values,
                            SlMessage *message) {
    size_t sites = ((Mean *)instance)->sites;
    double sum = 0.0;
    (void)tallies;
    if (views[0].kind != SL_VIEW_BYTES) return fail(message, "only bytes are read");
    for (size_t s = 0; s < sites; s++) sum += spin(&views[0], s);
    values[0] = sum / (double)sites;
    return SL_OK;
}

static const SlObservable mean = { sizeof(SlObservable), rule_create, free,         SL_VIEW_BYTES, 1,
                                   mean_prepare,         free,        mean_columns, mean_measure };

static const SlItem items[] = {
    { sizeof(SlItem), SL_LATTICE, 1, SL_TEXT("c-ring"), &ring },
    { sizeof(SlItem), SL_MODEL, 1, SL_TEXT("c-triple"), &triple },
    { sizeof(SlItem), SL_MODEL, 1, SL_TEXT("c-factor"), &factor },
    { sizeof(SlItem), SL_UPDATE, 1, SL_TEXT("c-heat-bath"), &heat_bath },
    { sizeof(SlItem), SL_OBSERVABLE, 1, SL_TEXT("c-mean"), &mean },
};
SPINLEDGER_LIBRARY(items)
