/* The plugin interface of spinledger. Made from the crate `spinledger-abi`, whose documentation has the rules that hold throughout
 * (status, memory, threads, randomness, growth); in short: allocate and free on one side, return SL_OK or a message, draw random
 * numbers from given streams only, and call no libm: its last bits differ between systems (SlHost has exp, ln, sin, cos and pow).
 * Compile without fused operations (-ffp-contract=off).
 *
 * A library, at file scope:
 *
 *     SPINLEDGER_MANIFEST("{\"interface\":1,\"library\":\"mine\",\"version\":\"0.1.0\",\"licence\":\"MIT\",\"items\":[...]}");
 *     static const SlItem items[] = { { sizeof(SlItem), SL_LATTICE, 1, SL_TEXT("my-lattice"), &my_lattice } };
 *     SPINLEDGER_LIBRARY(items)
 */

#ifndef SPINLEDGER_H
#define SPINLEDGER_H

#include <stdarg.h>
#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>
#include <stdlib.h>

/* Keeps the manifest, JSON text, where it can be read without loading the library. */
#if defined(__APPLE__)
#define SPINLEDGER_MANIFEST_SECTION "__DATA,__spinledger"
#else
#define SPINLEDGER_MANIFEST_SECTION ".spinledger"
#endif
#define SPINLEDGER_MANIFEST(json) \
    __attribute__((used, section(SPINLEDGER_MANIFEST_SECTION))) static const char spinledger_manifest[] = json

/* An SlText of a string literal. */
#define SL_TEXT(literal) { (const uint8_t *)(literal), sizeof(literal) - 1 }

/* The sizes in SlLibrary.layout. */
#define SPINLEDGER_LAYOUT \
    { sizeof(SlValue), sizeof(SlGraph), sizeof(SlEnergy), sizeof(SlView), sizeof(SlTallies), sizeof(SlPrepare), \
      sizeof(SlBond), sizeof(SlItem) }

/* The entry function for an array of items. */
#ifdef __cplusplus
#define SPINLEDGER_EXTERN extern "C"
#else
#define SPINLEDGER_EXTERN extern
#endif
#define SPINLEDGER_LIBRARY(items) \
    SPINLEDGER_EXTERN __attribute__((visibility("default"))) const SlLibrary *spinledger_plugin(void); \
    const SlLibrary *spinledger_plugin(void) { \
        static const SlLibrary library = { SL_MAGIC, SL_INTERFACE_VERSION, sizeof(void *), sizeof(SlLibrary), \
                                           SPINLEDGER_LAYOUT, sizeof(items) / sizeof((items)[0]), items }; \
        return &library; \
    }


// Version of the interface that these types describe.
#define SL_INTERFACE_VERSION 1

// First word of every `SlLibrary`: the bytes `spinledg` read as a little-endian number.
#define SL_MAGIC 7450191199960920179

// All went well.
#define SL_OK 0

// It failed; the message says why.
#define SL_FAILED 1

// A panic was caught at the border; the message holds its text.
#define SL_PANICKED 2

// The host asked to stop (`SlHost::cancelled`) and the function did.
#define SL_CANCELLED 3

// Kinds of items: sites and bonds.
#define SL_LATTICE 1

// A Hamiltonian.
#define SL_MODEL 2

// An update rule.
#define SL_UPDATE 3

// An observable.
#define SL_OBSERVABLE 4

// Kinds of `SlValue`.
#define SL_VALUE_NULL 0

// `integer` is 0 or 1.
#define SL_VALUE_BOOLEAN 1

// `integer` holds it, and `number` the same as a double.
#define SL_VALUE_INTEGER 2

// `number` holds it.
#define SL_VALUE_NUMBER 3

// `text` holds it.
#define SL_VALUE_TEXT 4

// `items` holds `count` elements.
#define SL_VALUE_LIST 5

// `items` holds `count` elements, each with its `key`, in byte order of the keys.
#define SL_VALUE_MAP 6

// One byte a site.
#define SL_VIEW_BYTES 1

// One bit a site, for two states.
#define SL_VIEW_BITS 2

// One vector of doubles a site.
#define SL_VIEW_VECTORS 4

// `energy` is valid.
#define SL_TALLY_ENERGY 1

// `magnetisation` is valid.
#define SL_TALLY_MAGNETISATION 2

// `proposed` and `accepted` are valid.
#define SL_TALLY_ACCEPTANCE 4

// The column is unchanged by the symmetries of the Hamiltonian.
#define SL_COLUMN_INVARIANT 1

// UTF-8 text, not terminated. Borrowed for the call unless said otherwise.
typedef struct SlText {
  // First byte; may be null when `length` is 0.
  const uint8_t *data;
  // Number of bytes.
  size_t length;
} SlText;

// A buffer of the host for an error message: the writer puts at most `capacity` bytes of UTF-8 and sets `length`.
typedef struct SlMessage {
  // Where to write.
  uint8_t *data;
  // Room in bytes.
  size_t capacity;
  // Bytes written.
  size_t length;
} SlMessage;

// A node of a parameter tree. Parameters arrive checked against the manifest, with defaults filled in.
typedef struct SlValue {
  // One of the `SL_VALUE_` constants.
  uint32_t kind;
  // Zero.
  uint32_t reserved;
  // Value of booleans and whole numbers.
  int64_t integer;
  // Value of numbers.
  double number;
  // Value of text.
  struct SlText text;
  // The name under which the node stands in its parent mapping.
  struct SlText key;
  // Children.
  const struct SlValue *items;
  // Number of children.
  size_t count;
} SlValue;

// Key of a random stream.
typedef struct SlKey {
  // 256 bits.
  uint8_t bytes[32];
} SlKey;

// State of a xoshiro256++ stream; plain data that may be copied into and out of a saved state.
typedef struct SlStream {
  // The four words of state.
  uint64_t state[4];
} SlStream;

// What the host offers. Valid for the life of the process.
typedef struct SlHost {
  // Size of this struct in bytes.
  size_t size;
  // To be handed back with every call.
  void *context;
  // Logs a line. Levels: 0 note, 1 warning.
  void (*log)(void *context, uint32_t level, struct SlText text);
  // Not zero when the host wants long calls to come to an end.
  int32_t (*cancelled)(void *context);
  // Starts the stream of a key.
  void (*open_stream)(void *context, const struct SlKey *key, struct SlStream *stream);
  // Draws `count` words from a stream.
  void (*fill)(void *context, struct SlStream *stream, uint64_t *words, size_t count);
  // Runs `body(argument, tile)` for every tile from 0 to `tiles` - 1, in any order, on the threads that the run lends. Tiles must
  // not write to the same memory. Returns when all are done.
  void (*parallel_for)(void *context, size_t tiles, void (*body)(void *argument, size_t tile), void *argument);
  // e^x; the same bits on every machine, unlike the C library's.
  double (*exp)(double x);
  // Natural logarithm.
  double (*ln)(double x);
  // Sine.
  double (*sin)(double x);
  // Cosine.
  double (*cos)(double x);
  // x^y.
  double (*pow)(double x, double y);
  // The key of a numbered stream under a key: for tiles that draw for themselves, or for streams of several purposes. Other numbers and
  // other keys give streams that have nothing to do with each other.
  void (*derive_key)(void *context, const struct SlKey *key, uint32_t number, struct SlKey *derived);
} SlHost;

// A bond.
typedef struct SlBond {
  // One end, a free site.
  uint32_t i;
  // The other end, free or pinned.
  uint32_t j;
  // Bond class.
  uint16_t class_index;
  // 1, or -1 where the spin at `j` is seen with opposite sign (across an antiperiodic seam).
  int8_t sign;
  // Zero.
  uint8_t reserved;
} SlBond;

// A lattice as the host keeps it: immutable, shared by all instances.
typedef struct SlGraph {
  // Size of this struct in bytes.
  size_t size;
  // Number of directions.
  uint32_t dimension;
  // Number of free sites.
  uint32_t sites;
  // Number of free and pinned sites.
  uint32_t total;
  // Number of bond classes.
  uint32_t classes;
  // Number of bonds.
  size_t bonds;
  // Bonds in the lattice's order, `bonds` of them.
  const struct SlBond *bond_list;
  // How often each bond wraps around each direction, `bonds` x `dimension`.
  const int32_t *wraps;
  // Where the neighbours of each free site begin, `sites` + 1.
  const uint32_t *offsets;
  // Neighbours, in order of bonds; a bond of a site with itself stands twice.
  const uint32_t *neighbours;
  // The bond behind each neighbour.
  const uint32_t *neighbour_bonds;
  // Positions in nearest-neighbour distances, `total` x `dimension`.
  const double *positions;
  // Sublattice of each site, `total`.
  const uint32_t *sublattices;
  // Direction to which each pinned site points, +1 or -1, `total` - `sites`.
  const int32_t *directions;
  // Primitive vectors, `dimension` x `dimension`, a row each.
  const double *vectors;
  // Period of each direction in cells; 0 where it is not periodic.
  const int64_t *periods;
  // Unit cells in each direction.
  const int64_t *cells;
  // Names of the classes.
  const struct SlText *class_names;
  // Number of faces; 0 where the lattice gives none.
  size_t faces;
  // Where the sites of each face begin, `faces` + 1.
  const uint32_t *face_offsets;
  // Sites around each face, in order.
  const uint32_t *face_sites;
} SlGraph;

// A table over k sites: energies of all q^k combinations, the first site's state counting most.
typedef struct SlFactorTable {
  // Number of sites.
  uint32_t order;
  // Zero.
  uint32_t reserved;
  // q^order energies.
  const double *energies;
} SlFactorTable;

// One many-body term.
typedef struct SlFactor {
  // Its table.
  uint32_t table;
  // Where its sites begin in `factor_sites`.
  uint32_t first;
} SlFactor;

// A configuration of one chain, where its owner keeps it. Everything that the numbers reach lies within `length`; a reader that does not
// trust the owner needs to look no further. A state is below the model's number of states unless the rule has a fault: who indexes memory by
// one checks it.
typedef struct SlView {
  // Size of this struct in bytes.
  size_t size;
  // One of the `SL_VIEW_` constants.
  uint32_t kind;
  // Components of vectors; 0 otherwise.
  uint32_t components;
  // Sites shown, `total` of the graph.
  size_t sites;
  // Bytes: site s is at `data[s * stride]`. Vectors: component c of site s is double `s * stride + c * component_stride`. Bits: without
  // `positions`, site s is bit `offset + s * stride` of the 64-bit words, the least significant bit first.
  size_t stride;
  // See `stride`.
  size_t component_stride;
  // See `stride`.
  size_t offset;
  // Bits: where not null, site s is bit `offset + positions[s]`. They do not change while the instance lives.
  const uint32_t *positions;
  // Bytes, 64-bit words or doubles, aligned as such.
  const void *data;
  // How many of them.
  size_t length;
} SlView;

// The energy that a custom model adds, of a whole configuration.
typedef int32_t (*SlTotal)(const void *model,
                           const struct SlGraph *graph,
                           const struct SlView *view,
                           double *energy,
                           struct SlMessage *message);

// The change of that energy for each of `count` proposals, taken one at a time from the configuration shown; the sites' footprints do
// not meet. Proposals are states (bytes) or vectors (doubles, components innermost).
typedef int32_t (*SlDelta)(const void *model,
                           const struct SlGraph *graph,
                           const struct SlView *view,
                           size_t count,
                           const uint32_t *sites,
                           const void *proposals,
                           double *changes,
                           struct SlMessage *message);

// The callbacks of a custom model, bound to it.
typedef struct SlCustom {
  // Size of this struct in bytes.
  size_t size;
  // The model, to be handed back.
  const void *model;
  // See `SlModel::total`.
  SlTotal total;
  // See `SlModel::delta`.
  SlDelta delta;
} SlCustom;

// A Hamiltonian on a graph, flattened by the host. Energy = pairs + sites + factors + vectors + custom, each where present.
//
// For discrete spins: sum over bonds b of `strength(b) E[table(b)][s_i][s_j]`, plus sum over free sites of `strength(i) E[class(i)][s_i]`,
// plus sum over factors. For vector spins: sum over bonds of `strength(b) S_i^T M S_j`, plus sum over free sites of
// `strength(i) (S^T A S + f . S)`.
// Signs of antiperiodic bonds are folded into the tables.
typedef struct SlEnergy {
  // Size of this struct in bytes.
  size_t size;
  // States of a discrete spin; 0 for vector spins.
  uint32_t states;
  // Components of a vector spin of unit length; 0 for discrete spins.
  uint32_t components;
  // Spin value of each state, or null where states have none.
  const double *values;
  // The state that is minus each state, or null.
  const uint8_t *negation;
  // State, or vector of `components`, of each pinned site (`total` - `sites`): exactly one of the two is not null when there are any.
  const uint8_t *pinned_states;
  // See `pinned_states`.
  const double *pinned_vectors;
  // Number of pair tables (or of vector couplings).
  uint32_t tables;
  // Number of site classes.
  uint32_t site_classes;
  // `tables` x q x q: energy by own state (row) and neighbour's state; null without pair tables.
  const double *pair_tables;
  // Table of each entry of `neighbours`, as seen from the site of the row.
  const uint16_t *neighbour_tables;
  // Table of each bond, rows by the state at `i`.
  const uint16_t *bond_tables;
  // Factor on each entry of `neighbours`, or null where all are 1.
  const double *neighbour_strengths;
  // Factor on each bond, or null where all are 1.
  const double *bond_strengths;
  // `site_classes` x q; null without site energies.
  const double *site_tables;
  // Class of each free site.
  const uint16_t *site_class;
  // Factor on each site's energy, or null where all are 1.
  const double *site_strengths;
  // Number of factor tables.
  size_t factor_tables;
  // The factor tables.
  const struct SlFactorTable *factor_table_list;
  // Number of factors.
  size_t factors;
  // The factors.
  const struct SlFactor *factor_list;
  // Sites of all factors.
  const uint32_t *factor_sites;
  // Where the factors of each free site begin, `sites` + 1; null without factors.
  const uint32_t *site_factor_offsets;
  // Factors of each site.
  const uint32_t *site_factors;
  // Which of the factor's sites it is.
  const uint32_t *site_factor_slots;
  // `tables` x n x n: energy S_i^T M S_j, own components as rows; null without.
  const double *couplings;
  // `site_classes` x n x n: energy S^T A S; null without.
  const double *anisotropies;
  // `site_classes` x n: energy f . S (a field enters with its sign); null without.
  const double *fields;
  // Callbacks of the model; null without.
  const struct SlCustom *custom;
  // Number of involutions of states that leave the energy unchanged when applied to all free spins (pinned rims aside).
  size_t involutions;
  // The involutions, each a map of q states.
  const uint8_t *involution_list;
  // Not zero where every permutation of states leaves the energy unchanged (pinned rims aside).
  uint32_t permutations;
  // Number of colours: sets of free sites that do not interact within.
  uint32_t colours;
  // Where the sites of each colour begin in `colour_sites`, `colours` + 1.
  const uint32_t *colour_offsets;
  // Free sites by colour, ascending within each.
  const uint32_t *colour_sites;
} SlEnergy;

// A configuration to write: `states` for discrete spins (one byte a site), `vectors` for vector spins (components innermost); `sites` of them.
typedef struct SlSpins {
  // Size of this struct in bytes.
  size_t size;
  // `total` of the graph.
  size_t sites;
  // Where to write bytes, or null.
  uint8_t *states;
  // Where to write vectors, or null.
  double *vectors;
} SlSpins;

// Totals that a rule keeps while it works.
typedef struct SlTallies {
  // Size of this struct in bytes.
  size_t size;
  // Which of them are valid: `SL_TALLY_` flags.
  uint32_t valid;
  // Zero.
  uint32_t reserved;
  // Total energy.
  double energy;
  // Sum of spin values over free sites; of vectors, their components.
  double magnetisation[3];
  // Proposals since the instance was prepared.
  uint64_t proposed;
  // Of these, accepted.
  uint64_t accepted;
  // Zero: room for totals to come, since tallies stand in arrays and do not grow. Flags in `valid` will tell of them.
  double spare[8];
} SlTallies;

// What an update rule is prepared with.
typedef struct SlPrepare {
  // Size of this struct in bytes.
  size_t size;
  // The host.
  const struct SlHost *host;
  // The lattice.
  const struct SlGraph *graph;
  // The Hamiltonian.
  const struct SlEnergy *energy;
  // 1/(k_B T) in 1/energy; at least 0.
  double inverse_temperature;
  // Number of chains of the group.
  size_t lanes;
  // Stream key of each chain, `lanes` of them.
  const struct SlKey *lane_keys;
  // Stream key of the group, for rules that draw for all lanes together.
  struct SlKey group_key;
} SlPrepare;

// Takes bytes.
typedef struct SlByteSink {
  // Size of this struct in bytes.
  size_t size;
  // To be handed back.
  void *context;
  // Appends bytes.
  int32_t (*write)(void *context, const uint8_t *data, size_t count);
} SlByteSink;

// Takes a lattice. Order of calls: geometry, sites, pinned, classes, bonds, then the rest.
typedef struct SlLatticeSink {
  // Size of this struct in bytes.
  size_t size;
  // To be handed back.
  void *context;
  // Primitive vectors (`dimension` x `dimension`, a row each, in nearest-neighbour distances), unit cells per direction, and
  // whether each direction is periodic (1) or not (0).
  int32_t (*geometry)(void *context,
                      uint32_t dimension,
                      const double *vectors,
                      const int64_t *cells,
                      const uint8_t *periodic);
  // Appends free sites: positions (`count` x dimension) and sublattices.
  int32_t (*sites)(void *context, size_t count, const double *positions, const uint32_t *sublattices);
  // Appends pinned sites, numbered after all free ones, with the direction (+1 or -1) that each points to.
  int32_t (*pinned)(void *context,
                    size_t count,
                    const double *positions,
                    const uint32_t *sublattices,
                    const int32_t *directions);
  // Names the next bond class: `first.x`, `second` ...
  int32_t (*class_name)(void *context, struct SlText name);
  // Appends bonds, with how often each wraps around each direction (`count` x dimension), or null for none.
  int32_t (*bonds)(void *context, size_t count, const struct SlBond *bonds, const int32_t *wraps);
  // Colour of each free site, such that no bond joins two sites of a colour. Optional: the host colours by itself otherwise.
  int32_t (*colours)(void *context, size_t count, const uint32_t *colours);
  // Appends faces: number of sites of each, and all their sites in order around. Optional.
  int32_t (*faces)(void *context, size_t count, const uint32_t *lengths, const uint32_t *sites);
} SlLatticeSink;

// Takes a Hamiltonian. `spins` or `vectors` comes first.
typedef struct SlModelSink {
  // Size of this struct in bytes.
  size_t size;
  // To be handed back.
  void *context;
  // Discrete spins of 2 to 256 states: the value of each (or null), the state that is minus each (or null), and the states
  // of sites pinned up and down (equal to `states` where there are none).
  int32_t (*spins)(void *context,
                   uint32_t states,
                   const double *values,
                   const uint8_t *negation,
                   uint32_t up,
                   uint32_t down);
  // Vector spins of 2 or 3 components and unit length, and the vector of sites pinned up.
  int32_t (*vectors)(void *context, uint32_t components, const double *up);
  // Energies of a bond class, q x q, rows by the state at `i`. Classes without are not coupled.
  int32_t (*pair)(void *context, uint32_t class_index, const double *energies);
  // Class of each free site; all are 0 otherwise.
  int32_t (*site_classes)(void *context, size_t count, const uint16_t *classes);
  // Energies of the states of a site class.
  int32_t (*site)(void *context, uint32_t class_index, const double *energies);
  // A factor on the energy of each bond (disorder).
  int32_t (*bond_strengths)(void *context, size_t count, const double *strengths);
  // A factor on the site energy of each free site (disorder).
  int32_t (*site_strengths)(void *context, size_t count, const double *strengths);
  // The next factor table: q^order energies, the first site's state counting most; order 1 to 8.
  int32_t (*factor_table)(void *context, uint32_t order, const double *energies);
  // Factors over a table, by its number: `count` x order sites, different within a factor.
  int32_t (*factors)(void *context, uint32_t table, size_t count, const uint32_t *sites);
  // Coupling matrix of a bond class, n x n: energy S_i^T M S_j.
  int32_t (*coupling)(void *context, uint32_t class_index, const double *matrix);
  // Anisotropy of a site class, n x n: energy S^T A S.
  int32_t (*anisotropy)(void *context, uint32_t class_index, const double *matrix);
  // Field of a site class, n: energy f . S.
  int32_t (*field)(void *context, uint32_t class_index, const double *field);
  // The model's own callbacks add energy.
  int32_t (*custom)(void *context);
  // An involution of states, a map of q, that leaves the energy unchanged when applied to all free spins.
  int32_t (*involution)(void *context, const uint8_t *map);
  // Every permutation of states does.
  int32_t (*permutations)(void *context);
} SlModelSink;

// Takes site numbers.
typedef struct SlSiteSink {
  // Size of this struct in bytes.
  size_t size;
  // To be handed back.
  void *context;
  // Appends sites.
  int32_t (*sites)(void *context, size_t count, const uint32_t *sites);
} SlSiteSink;

// Takes an observable's columns.
typedef struct SlColumnSink {
  // Size of this struct in bytes.
  size_t size;
  // To be handed back.
  void *context;
  // The next column: name, unit (`energy` or empty), `SL_COLUMN_` flags, and numbers a measurement (1 for a plain column).
  int32_t (*column)(void *context, struct SlText name, struct SlText unit, uint32_t flags, uint32_t width);
} SlColumnSink;

// Makes an item from its parameters (a mapping). On success `*item` is set.
typedef int32_t (*SlCreate)(const struct SlHost *host,
                            const struct SlValue *parameters,
                            void **item,
                            struct SlMessage *message);

// Frees an item or an instance.
typedef void (*SlDestroy)(void *item);

// Functions of a lattice.
typedef struct SlLattice {
  // Size of this struct in bytes.
  size_t size;
  // Required.
  SlCreate create;
  // Required.
  SlDestroy destroy;
  // Writes the lattice. Required.
  int32_t (*build)(const void *lattice, const struct SlLatticeSink *sink, struct SlMessage *message);
} SlLattice;

// Functions of a model.
typedef struct SlModel {
  // Size of this struct in bytes.
  size_t size;
  // Required.
  SlCreate create;
  // Required.
  SlDestroy destroy;
  // Writes the Hamiltonian on a graph. Required.
  int32_t (*describe)(const void *model,
                      const struct SlGraph *graph,
                      const struct SlModelSink *sink,
                      struct SlMessage *message);
  // The sites on whose spins the change of energy at a site depends, itself aside. With `custom` only.
  int32_t (*footprint)(const void *model,
                       const struct SlGraph *graph,
                       uint32_t site,
                       const struct SlSiteSink *sink,
                       struct SlMessage *message);
  // With `custom` only.
  SlTotal total;
  // With `custom` only.
  SlDelta delta;
} SlModel;

// Functions of an update rule.
typedef struct SlUpdate {
  // Size of this struct in bytes.
  size_t size;
  // Required.
  SlCreate create;
  // Required.
  SlDestroy destroy;
  // Makes an instance for a group of chains. Required.
  int32_t (*prepare)(const void *rule, const struct SlPrepare *prepare, void **instance, struct SlMessage *message);
  // Frees an instance. Required.
  SlDestroy release;
  // Takes over the configuration of a chain (contiguous bytes or vectors). Required.
  int32_t (*import)(void *instance, size_t lane, const struct SlView *view, struct SlMessage *message);
  // Writes the configuration of a chain. Required.
  int32_t (*export_)(const void *instance, size_t lane, const struct SlSpins *spins, struct SlMessage *message);
  // Does `count` sweeps of all chains. Required.
  int32_t (*sweep)(void *instance, uint64_t count, struct SlMessage *message);
  // Shows a chain; valid until the next call on the instance. Required.
  int32_t (*view)(void *instance, size_t lane, struct SlView *view, struct SlMessage *message);
  // The totals of a chain. Optional.
  int32_t (*tallies)(const void *instance, size_t lane, struct SlTallies *tallies);
  // Writes everything that the future depends on. Required.
  int32_t (*save)(const void *instance, const struct SlByteSink *sink, struct SlMessage *message);
  // Takes back what `save` of the same revision wrote. Required.
  int32_t (*restore)(void *instance, const uint8_t *data, size_t count, struct SlMessage *message);
  // Turns the adapting of step widths on (1) or off (0). Optional.
  int32_t (*adapt)(void *instance, int32_t on);
  // Which of the rule's code runs for an instance, in a word or two for people (`portable`, `avx512`); UTF-8, valid until the next call on
  // the instance. Nothing depends on it. Optional.
  int32_t (*path)(const void *instance, struct SlText *path);
} SlUpdate;

// Functions of an observable.
typedef struct SlObservable {
  // Size of this struct in bytes.
  size_t size;
  // Required.
  SlCreate create;
  // Required.
  SlDestroy destroy;
  // Views that it accepts, `SL_VIEW_` flags; the host converts otherwise.
  uint32_t views;
  // Chains that it reads at once, 1 or 2.
  uint32_t chains;
  // Makes an instance for a graph and a Hamiltonian. Required.
  int32_t (*prepare)(const void *observable,
                     const struct SlHost *host,
                     const struct SlGraph *graph,
                     const struct SlEnergy *energy,
                     void **instance,
                     struct SlMessage *message);
  // Frees an instance. Required.
  SlDestroy release;
  // Names the columns. Required.
  int32_t (*columns)(const void *instance, const struct SlColumnSink *sink, struct SlMessage *message);
  // Measures: `chains` views and tallies in, one double a column (or `width` of them) out. Required.
  int32_t (*measure)(void *instance,
                     const struct SlView *views,
                     const struct SlTallies *tallies,
                     double *values,
                     struct SlMessage *message);
} SlObservable;

// One item of a library.
typedef struct SlItem {
  // Size of this struct in bytes.
  size_t size;
  // `SL_LATTICE`, `SL_MODEL`, `SL_UPDATE` or `SL_OBSERVABLE`.
  uint32_t kind;
  // As in the manifest.
  uint32_t revision;
  // As in the manifest.
  struct SlText name;
  // The table of functions for its kind.
  const void *functions;
} SlItem;

// What a library's entry function returns; valid for the life of the process.
typedef struct SlLibrary {
  // `MAGIC`.
  uint64_t magic;
  // `INTERFACE_VERSION` of the builder.
  uint32_t interface;
  // Size of a pointer in bytes.
  uint32_t pointer_size;
  // Size of this struct in bytes.
  size_t size;
  // Sizes of `SlValue`, `SlGraph`, `SlEnergy`, `SlView`, `SlTallies`, `SlPrepare`, `SlBond` and `SlItem` as the builder's compiler lays
  // them out: a disagreement is found here and not in the numbers.
  uint32_t layout[8];
  // Number of items.
  size_t count;
  // The items.
  const struct SlItem *items;
} SlLibrary;

// Type of the exported function.
typedef const struct SlLibrary *(*SlEntry)(void);



#endif  /* SPINLEDGER_H */
