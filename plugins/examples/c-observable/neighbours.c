/* A complete plugin library in C with one observable: the mean product of the spins at both ends of a bond.
 *
 *     cc -shared -fPIC -O2 -ffp-contract=off -I <spinledger>/crates/abi/include neighbours.c -o neighbours.so
 *
 * Name the file under `plugins:` in a pipeline, and `neighbour-product` under `observe:`. */
#include "spinledger.h"
#include <stdlib.h>
#include <string.h>

SPINLEDGER_MANIFEST(
    "{\"interface\":1,\"library\":\"neighbours\",\"version\":\"0.1.0\",\"licence\":\"MIT OR Apache-2.0\",\"items\":[{"
    "\"kind\":\"observable\",\"name\":\"neighbour-product\",\"revision\":1,"
    "\"about\":\"Mean product of the spin values at both ends of a bond.\",\"formula\":\"sum_b s_i s_j / bonds\","
    "\"observable\":{\"needs\":[\"scalar\"],\"columns\":[{\"name\":\"neighbour_product\",\"about\":\"Mean over bonds.\"}]}}]}");

/* Writes a message for the person who runs the pipeline. */
static int32_t fail(SlMessage *message, const char *text) {
    size_t length = strlen(text);
    if (length > message->capacity) length = message->capacity;
    memcpy(message->data, text, length);
    message->length = length;
    return SL_FAILED;
}

/* The observable as a pipeline names it. It has no parameters, so there is nothing to keep; what is made must not be null, though. */
static int32_t create(const SlHost *host, const SlValue *parameters, void **item, SlMessage *message) {
    (void)host;
    (void)parameters;
    *item = malloc(1);
    return *item == NULL ? fail(message, "out of memory") : SL_OK;
}

/* The observable on a lattice with a Hamiltonian. Both outlive the instance, so pointers to them may be kept. */
typedef struct {
    const SlGraph *graph;
    const SlEnergy *energy;
} Instance;

static int32_t prepare(const void *observable, const SlHost *host, const SlGraph *graph, const SlEnergy *energy,
                       void **instance, SlMessage *message) {
    (void)observable;
    (void)host;
    if (energy->values == NULL) return fail(message, "the states of this model have no spin values");
    if (graph->bonds == 0) return fail(message, "the lattice has no bonds");
    Instance *made = malloc(sizeof *made);
    if (made == NULL) return fail(message, "out of memory");
    made->graph = graph;
    made->energy = energy;
    *instance = made;
    return SL_OK;
}

static int32_t columns(const void *instance, const SlColumnSink *sink, SlMessage *message) {
    SlText name = SL_TEXT("neighbour_product"), unit = { NULL, 0 };
    (void)instance;
    (void)message;
    return sink->column(sink->context, name, unit, SL_COLUMN_INVARIANT, 1);
}

/* The table below asks for bytes, so the host shows one byte a site, `stride` apart, pinned sites included. */
static int32_t measure(void *instance, const SlView *views, const SlTallies *tallies, double *values,
                       SlMessage *message) {
    const Instance *self = instance;
    const double *value = self->energy->values;
    const uint8_t *states = views[0].data;
    size_t stride = views[0].stride;
    double sum = 0.0;
    (void)tallies;
    (void)message;
    for (size_t b = 0; b < self->graph->bonds; b++) {
        SlBond bond = self->graph->bond_list[b];
        sum += bond.sign * value[states[bond.i * stride]] * value[states[bond.j * stride]];
    }
    values[0] = sum / (double)self->graph->bonds;
    return SL_OK;
}

static const SlObservable neighbour_product = {
    sizeof(SlObservable), create, free, SL_VIEW_BYTES, 1, prepare, free, columns, measure,
};

static const SlItem items[] = { { sizeof(SlItem), SL_OBSERVABLE, 1, SL_TEXT("neighbour-product"), &neighbour_product } };

SPINLEDGER_LIBRARY(items)
