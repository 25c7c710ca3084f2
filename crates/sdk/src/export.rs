//! The one macro.

/// Makes a library of lattices, models, update rules and observables: once in a crate whose `crate-type` is `cdylib`.
///
/// Kinds may be left out; the order is that of the example. The compiler writes the manifest from the items' specifications
/// (`SPEC`), so that the program can describe the library without loading it.
///
/// ```
/// use spinledger_sdk::{Lattice, LatticeBuilder, LatticeSpec, Params, Result};
///
/// struct Dimer;
///
/// impl Lattice for Dimer {
///     const SPEC: LatticeSpec =
///         LatticeSpec { name: "dimer", about: "Two sites and a bond.", classes: &["first"], ..LatticeSpec::EMPTY };
///
///     fn new(_: &Params) -> Result<Self> {
///         Ok(Dimer)
///     }
///
///     fn build(&self, lattice: &mut LatticeBuilder) -> Result<()> {
///         lattice.geometry(&[vec![1.0]], &[2], &[false]);
///         let (a, b) = (lattice.site(&[0.0], 0), lattice.site(&[1.0], 0));
///         let first = lattice.class("first");
///         lattice.bond(a, b, first);
///         Ok(())
///     }
/// }
///
/// spinledger_sdk::export! {
///     library: "dimers", version: "0.1.0", licence: "MIT",
///     lattices: [Dimer],
/// }
/// # fn main() {}
/// ```
#[macro_export]
macro_rules! export {
    (
        library: $library:expr, version: $version:expr, licence: $licence:expr
        $(, lattices: [$($lattice:ty),* $(,)?])?
        $(, models: [$($model:ty),* $(,)?])?
        $(, updates: [$($update:ty),* $(,)?])?
        $(, observables: [$($observable:ty),* $(,)?])?
        $(,)?
    ) => {
        #[doc(hidden)]
        const _: () = {
            const SPECS: &[$crate::border::ItemSpec] = &[
                $($($crate::border::ItemSpec::Lattice(&<$lattice as $crate::Lattice>::SPEC),)*)?
                $($($crate::border::ItemSpec::Model(&<$model as $crate::Model>::SPEC),)*)?
                $($($crate::border::ItemSpec::Update(&<$update as $crate::Update>::SPEC),)*)?
                $($($crate::border::ItemSpec::Observable(&<$observable as $crate::Observable>::SPEC),)*)?
            ];
            const COUNT: usize = SPECS.len();
            // A long manifest takes the compiler more steps than it lets pass without a word.
            #[allow(long_running_const_eval)]
            const LENGTH: usize = $crate::border::Manifest::<0>::of($library, $version, $licence, SPECS).length();

            #[used]
            #[cfg_attr(not(target_vendor = "apple"), unsafe(link_section = ".spinledger"))]
            #[cfg_attr(target_vendor = "apple", unsafe(link_section = "__DATA,__spinledger"))]
            #[allow(long_running_const_eval)]
            static MANIFEST: [u8; LENGTH] =
                $crate::border::Manifest::<LENGTH>::of($library, $version, $licence, SPECS).bytes();

            static ITEMS: $crate::border::Shared<[$crate::border::abi::SlItem; COUNT]> = $crate::border::Shared([
                $($($crate::border::item(
                    $crate::border::abi::SL_LATTICE,
                    <$lattice as $crate::Lattice>::SPEC.revision,
                    <$lattice as $crate::Lattice>::SPEC.name,
                    ($crate::border::Lattices::<$lattice>::TABLE as *const $crate::border::abi::SlLattice).cast(),
                ),)*)?
                $($($crate::border::item(
                    $crate::border::abi::SL_MODEL,
                    <$model as $crate::Model>::SPEC.revision,
                    <$model as $crate::Model>::SPEC.name,
                    ($crate::border::Models::<$model>::TABLE as *const $crate::border::abi::SlModel).cast(),
                ),)*)?
                $($($crate::border::item(
                    $crate::border::abi::SL_UPDATE,
                    <$update as $crate::Update>::SPEC.revision,
                    <$update as $crate::Update>::SPEC.name,
                    ($crate::border::Updates::<$update>::TABLE as *const $crate::border::abi::SlUpdate).cast(),
                ),)*)?
                $($($crate::border::item(
                    $crate::border::abi::SL_OBSERVABLE,
                    <$observable as $crate::Observable>::SPEC.revision,
                    <$observable as $crate::Observable>::SPEC.name,
                    ($crate::border::Observables::<$observable>::TABLE as *const $crate::border::abi::SlObservable)
                        .cast(),
                ),)*)?
            ]);

            static LIBRARY: $crate::border::Shared<$crate::border::abi::SlLibrary> =
                $crate::border::Shared($crate::border::library(&ITEMS.0));

            #[unsafe(no_mangle)]
            extern "C" fn spinledger_plugin() -> *const $crate::border::abi::SlLibrary {
                // Refers to the manifest, so that no linker takes it for unused.
                ::core::hint::black_box(&MANIFEST);
                &LIBRARY.0
            }
        };
    };
}
