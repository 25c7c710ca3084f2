/* A library with one lattice, and with one thing wrong with it, chosen when it is compiled:
 *
 *     cc -shared -fPIC -DWRONG_LAYOUT -I crates/abi/include tests/plugins/c/variant.c -o wrong-layout.so
 *
 * Without a choice it is a proper library, and with NAMED_LATTICES one of that name. NO_MANIFEST BAD_JSON WRONG_FIELDS MANIFEST_VERSION TWICE: the manifest. NO_SYMBOL RETURNS_NULL
 * WRONG_MAGIC CODE_VERSION WRONG_POINTER WRONG_LAYOUT NEWER_GRAPH OLDER_GRAPH OTHER_ITEM OTHER_REVISION NO_BUILD: the code. INITIALISER: its
 * constructor writes a file that the environment variable SPINLEDGER_TEST_MARK names, which proves that the library was loaded.
 * BAD_BOND BAD_COLOUR BAD_POSITION NULL_POINTER SELF_BOND PINNED_BOND: the lattice. */
#include "spinledger.h"
#include <stdio.h>
#include <stdlib.h>

#ifdef MANIFEST_VERSION
#define VERSION "99"
#else
#define VERSION "1"
#endif
#ifdef NAMED_LATTICES
#define NAME "lattices"
#else
#define NAME "variant"
#endif
#define LATTICE(name) "{\"kind\":\"lattice\",\"name\":\"" name "\",\"revision\":1,\"about\":\"Two sites.\"," \
    "\"lattice\":{\"dimension\":1,\"classes\":[\"first\"]}}"

#if defined(BAD_JSON)
SPINLEDGER_MANIFEST("{\"interface\":1,\"library\":");
#elif defined(WRONG_FIELDS)
SPINLEDGER_MANIFEST("{\"interface\":1,\"library\":\"variant\",\"items\":\"none\"}");
#elif defined(TWICE)
SPINLEDGER_MANIFEST("{\"interface\":1,\"library\":\"variant\",\"version\":\"1\",\"licence\":\"MIT\",\"items\":["
                    LATTICE("pair-of-sites") "," LATTICE("pair-of-sites") "]}");
#elif !defined(NO_MANIFEST)
SPINLEDGER_MANIFEST("{\"interface\":" VERSION ",\"library\":\"" NAME "\",\"version\":\"1\",\"licence\":\"MIT\",\"items\":["
                    LATTICE("pair-of-sites") "]}");
#endif

#ifdef INITIALISER
__attribute__((constructor)) static void mark(void) {
    const char *name = getenv("SPINLEDGER_TEST_MARK");
    FILE *file = name == NULL ? NULL : fopen(name, "w");
    if (file != NULL) {
        fputs("loaded\n", file);
        fclose(file);
    }
}
#endif

#if !defined(NO_SYMBOL)
static int32_t create(const SlHost *host, const SlValue *parameters, void **item, SlMessage *message) {
    (void)host;
    (void)parameters;
    (void)message;
    *item = malloc(1);
    return *item == NULL ? SL_FAILED : SL_OK;
}

#ifndef NO_BUILD
static int32_t build(const void *lattice, const SlLatticeSink *sink, SlMessage *message) {
    static const double vector[] = { 1.0 };
#ifdef BAD_POSITION
    static const double positions[] = { 0.0, 0.0 / 0.0 };
#else
    static const double positions[] = { 0.0, 1.0 };
#endif
    static const int64_t cells[] = { 2 };
    static const uint8_t periodic[] = { 0 };
    static const uint32_t sublattices[] = { 0, 0 }, colours[] = { 0, 0 };
    static const int32_t directions[] = { 1 };
    SlText first = SL_TEXT("first");
    SlBond bond = { 0, 1, 0, 1, 0 };
    (void)lattice;
    (void)message;
    (void)positions;
    (void)directions;
    (void)colours;
#if defined(BAD_BOND)
    bond.j = 7;
#elif defined(SELF_BOND)
    bond.j = 0;
#endif
    /* Statuses are passed over on purpose: the host must remember what it refused. */
    sink->geometry(sink->context, 1, vector, cells, periodic);
#ifdef PINNED_BOND
    sink->sites(sink->context, 1, positions, sublattices);
    sink->pinned(sink->context, 1, positions + 1, sublattices, directions);
    bond.i = 1;
    bond.j = 0;
#elif defined(NULL_POINTER)
    sink->sites(sink->context, 2, NULL, sublattices);
#else
    sink->sites(sink->context, 2, positions, sublattices);
#endif
    sink->class_name(sink->context, first);
    sink->bonds(sink->context, 1, &bond, NULL);
#ifdef BAD_COLOUR
    sink->colours(sink->context, 2, colours);
#endif
    return SL_OK;
}
#else
#define build NULL
#endif

static const SlLattice lattice = { sizeof(SlLattice), create, free, build };

#ifdef OTHER_REVISION
#define REVISION 2
#else
#define REVISION 1
#endif
#ifdef OTHER_ITEM
static const SlItem items[] = { { sizeof(SlItem), SL_LATTICE, REVISION, SL_TEXT("another"), &lattice } };
#else
static const SlItem items[] = { { sizeof(SlItem), SL_LATTICE, REVISION, SL_TEXT("pair-of-sites"), &lattice } };
#endif

const SlLibrary *spinledger_plugin(void);
const SlLibrary *spinledger_plugin(void) {
    static SlLibrary library = { SL_MAGIC, SL_INTERFACE_VERSION, sizeof(void *), sizeof(SlLibrary), SPINLEDGER_LAYOUT, 1,
                                 items };
#if defined(RETURNS_NULL)
    return NULL;
#elif defined(WRONG_MAGIC)
    library.magic = 1;
#elif defined(CODE_VERSION)
    library.interface = 99;
#elif defined(WRONG_POINTER)
    library.pointer_size = 4;
#elif defined(WRONG_LAYOUT)
    library.layout[3] -= 8; /* SlView */
#elif defined(NEWER_GRAPH)
    library.layout[1] += 8; /* SlGraph */
#elif defined(OLDER_GRAPH)
    library.layout[1] -= 8;
#endif
    return &library;
}
#endif
