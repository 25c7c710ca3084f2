//! Observables.

use crate::answer::ask;
use crate::collected::{Collected, Fault, slice};
use crate::error::{HostError, Result};
use crate::item::Handle;
use crate::services::HostTable;
use crate::shown::Shown;
use crate::{Energy, Graph, Label, Sampler};
use spinledger_abi::{
    SL_COLUMN_INVARIANT, SL_FAILED, SL_VIEW_BITS, SL_VIEW_BYTES, SL_VIEW_VECTORS, SlColumnSink, SlObservable,
    SlTallies, SlText, SlView,
};
use spinledger_flatten::Unsound;
use spinledger_terms::ColumnSpec;
use std::ffi::c_void;
use std::sync::Arc;

/// An observable made from parameters.
#[derive(Clone)]
pub struct ObservableItem {
    pub(crate) table: &'static SlObservable,
    pub(crate) handle: Arc<Handle>,
    pub(crate) host: &'static HostTable,
}

impl ObservableItem {
    /// The observable on a lattice with a Hamiltonian.
    ///
    /// # Errors
    /// The observable refuses or does not read this kind of spin, the Hamiltonian stands on another lattice, or the columns cannot be: none, without
    /// name, two of one name, of a unit other than `energy`, or of several numbers a measurement, which tables do not hold yet.
    pub fn prepare(&self, graph: &Arc<Graph>, energy: &Arc<Energy>) -> Result<Observer> {
        if !Arc::ptr_eq(graph, energy.graph()) {
            return Err(self.handle.unsuited("the Hamiltonian stands on another lattice"));
        }
        let discrete = SL_VIEW_BYTES | if energy.states == 2 { SL_VIEW_BITS } else { 0 };
        let readable = if energy.components > 0 { SL_VIEW_VECTORS } else { discrete };
        if self.table.views & readable == 0 {
            let what = if energy.components > 0 { "vector spins" } else { "spins of this many states" };
            return Err(self.handle.unsuited(format_args!("it does not read {what}")));
        }
        let mut instance = std::ptr::null_mut();
        ask(&self.handle.label, "prepare", |message| match self.table.prepare {
            // SAFETY: the table was checked; observable, graph and energy live as long as the observer.
            Some(prepare) => unsafe {
                let (host, energy) = (self.host.raw(), energy.raw());
                prepare(self.handle.pointer(), host, graph.raw(), energy, &mut instance, message)
            },
            None => SL_FAILED,
        })?;
        if instance.is_null() {
            return Err(self.handle.wrong("it prepares nothing"));
        }
        let mut observer = Observer {
            table: self.table,
            instance,
            columns: Vec::new(),
            broken: false,
            observable: self.handle.clone(),
            energy: energy.clone(),
        };
        observer.columns = observer.ask_columns()?;
        Ok(observer)
    }

    /// Chains that it reads at once, 1 or 2.
    pub fn chains(&self) -> usize {
        self.table.chains as usize
    }

    /// The observable.
    pub fn label(&self) -> &Label {
        &self.handle.label
    }
}

impl std::fmt::Debug for ObservableItem {
    fn fmt(&self, f: &mut std::fmt::Formatter<'_>) -> std::fmt::Result {
        self.handle.fmt(f)
    }
}

/// An observable on a lattice with a Hamiltonian. After a panic every call fails.
pub struct Observer {
    table: &'static SlObservable,
    instance: *mut c_void,
    columns: Vec<ColumnSpec>,
    broken: bool,
    // Dropped after the instance is released (`Drop` runs first): it refers to them.
    observable: Arc<Handle>,
    energy: Arc<Energy>,
}

// SAFETY: by the rules of the interface an instance may move between threads, as long as one at a time uses it, which `&mut` ensures.
unsafe impl Send for Observer {}

impl Observer {
    /// Its columns, one number each. What they are about stands in the library's manifest.
    pub fn columns(&self) -> &[ColumnSpec] {
        &self.columns
    }

    /// Chains that it reads at once, 1 or 2.
    pub fn chains(&self) -> usize {
        self.table.chains as usize
    }

    /// The observable.
    pub fn label(&self) -> &Label {
        &self.observable.label
    }

    /// Measures chains of one sampler: as many lanes as it reads chains; one number a column out.
    ///
    /// # Errors
    /// Another number of lanes or columns, chains of another Hamiltonian, or the rule or the observable fails.
    pub fn measure(&mut self, sampler: &mut Sampler, lanes: &[usize], out: &mut [f64]) -> Result<()> {
        match *lanes {
            [lane] => measure_all(std::slice::from_mut(self), sampler, lane, out),
            [first, second] => {
                let tallies = [sampler.raw_tallies(first)?, sampler.raw_tallies(second)?];
                self.check_energy(sampler)?;
                // The second view may overwrite what the first shows.
                let first = owned(sampler, first)?;
                let second = sampler.shown(second)?;
                measure_shown(std::slice::from_mut(self), &mut [first, second], &tallies, out)
            }
            _ => Err(self.observable.unsuited(format_args!("it is to read {} chains", lanes.len()))),
        }
    }

    /// Measures two chains of two samplers.
    ///
    /// # Errors
    /// As for [`Observer::measure`].
    pub fn measure_pair(
        &mut self,
        first: (&mut Sampler, usize),
        second: (&mut Sampler, usize),
        out: &mut [f64],
    ) -> Result<()> {
        measure_all_pair(std::slice::from_mut(self), first, second, out)
    }

    fn check_energy(&self, sampler: &Sampler) -> Result<()> {
        if Arc::ptr_eq(&self.energy, sampler.energy()) {
            return Ok(());
        }
        Err(self.observable.unsuited("the chain has another Hamiltonian"))
    }

    fn ask_columns(&self) -> Result<Vec<ColumnSpec>> {
        let mut collected = Collected::new(Vec::new());
        let sink = SlColumnSink {
            size: size_of::<SlColumnSink>(),
            context: (&raw mut collected).cast(),
            column: Some(column),
        };
        let asked = ask(&self.observable.label, "name its columns", |message| match self.table.columns {
            // SAFETY: the instance is alive; the sink and what it writes to live for the call.
            Some(columns) => unsafe { columns(self.instance, &sink, message) },
            None => SL_FAILED,
        });
        let wrong = |what: Unsound| self.observable.wrong(what);
        collected.finish(
            asked,
            |columns| if columns.is_empty() { Err(Unsound::new("it has no columns")) } else { Ok(columns) },
            wrong,
        )
    }

    /// Measures what is shown.
    fn measure_views(&mut self, views: &[SlView], tallies: &[SlTallies], out: &mut [f64]) -> Result<()> {
        if self.broken {
            return Err(HostError::Broken { label: self.observable.label.clone() });
        }
        let (measure, instance) = (self.table.measure, self.instance);
        let answer = ask(&self.observable.label, "measure", |message| match measure {
            // SAFETY: the instance is alive and used by nobody else; as many views and tallies as chains, room for all columns.
            Some(measure) => unsafe { measure(instance, views.as_ptr(), tallies.as_ptr(), out.as_mut_ptr(), message) },
            None => SL_FAILED,
        });
        self.broken = matches!(answer, Err(HostError::Panicked { .. } | HostError::Cancelled { .. }));
        answer
    }
}

impl Drop for Observer {
    fn drop(&mut self) {
        if let Some(release) = self.table.release {
            // SAFETY: prepared by the same observable, and not used afterwards.
            unsafe { release(self.instance) };
        }
    }
}

impl std::fmt::Debug for Observer {
    fn fmt(&self, f: &mut std::fmt::Formatter<'_>) -> std::fmt::Result {
        f.debug_struct("Observer").field("observable", &self.observable).field("columns", &self.columns).finish()
    }
}

/// Measures a chain with several observables that read one chain each: the rule shows the chain once, and it is converted at most once to each
/// form that is wanted. `out` takes the columns of all, in order.
///
/// # Errors
/// As for [`Observer::measure`].
pub fn measure_all(observers: &mut [Observer], sampler: &mut Sampler, lane: usize, out: &mut [f64]) -> Result<()> {
    observers.iter().try_for_each(|observer| observer.check_energy(sampler))?;
    let tallies = sampler.raw_tallies(lane)?;
    let shown = sampler.shown(lane)?;
    measure_shown(observers, &mut [shown], &[tallies], out)
}

/// The same for observables that read two chains, of two samplers.
///
/// # Errors
/// As for [`Observer::measure`].
pub fn measure_all_pair(
    observers: &mut [Observer],
    first: (&mut Sampler, usize),
    second: (&mut Sampler, usize),
    out: &mut [f64],
) -> Result<()> {
    for observer in observers.iter() {
        observer.check_energy(first.0)?;
        observer.check_energy(second.0)?;
    }
    let tallies = [first.0.raw_tallies(first.1)?, second.0.raw_tallies(second.1)?];
    let shown = &mut [first.0.shown(first.1)?, second.0.shown(second.1)?];
    measure_shown(observers, shown, &tallies, out)
}

fn measure_shown(
    observers: &mut [Observer],
    shown: &mut [Shown],
    tallies: &[SlTallies],
    out: &mut [f64],
) -> Result<()> {
    let mut rest = out;
    let mut views = Vec::with_capacity(shown.len());
    for observer in observers {
        if observer.chains() != shown.len() {
            let (needs, given) = (observer.chains(), shown.len());
            return Err(observer.observable.unsuited(format_args!("it reads {needs} chains at once, not {given}")));
        }
        views.clear();
        for one in shown.iter_mut() {
            match one.view(observer.table.views) {
                Some(view) => views.push(view),
                None => return Err(observer.observable.unsuited("it does not read this kind of spin")),
            }
        }
        let Some((own, others)) = rest.split_at_mut_checked(observer.columns.len()) else {
            return Err(observer.observable.unsuited("there is no room for its columns"));
        };
        observer.measure_views(&views, tallies, own)?;
        rest = others;
    }
    Ok(())
}

/// A chain of a sampler as a copy.
fn owned(sampler: &mut Sampler, lane: usize) -> Result<Shown> {
    let configuration = sampler.export(lane)?;
    Ok(Shown::own(configuration, sampler.energy()))
}

unsafe extern "C" fn column(context: *mut c_void, name: SlText, unit: SlText, flags: u32, width: u32) -> i32 {
    // SAFETY: the plugin hands back the sink's context, and texts as the interface says.
    unsafe {
        Collected::<Vec<ColumnSpec>>::take(context, |columns| {
            let text = |text: SlText, what: &str| {
                let bytes = slice(text.data, text.length, what)?.to_vec();
                String::from_utf8(bytes).map_err(|_| Fault::from(Unsound::new(format!("{what} is not UTF-8"))))
            };
            let name = text(name, "the name of a column")?;
            let unit = text(unit, "the unit of a column")?;
            let refuse = |what: String| Err(Unsound::new(what).into());
            if name.is_empty() {
                return refuse("a column has no name".into());
            }
            if columns.iter().any(|column| column.name == name) {
                return refuse(format!("it has two columns `{name}`"));
            }
            if !matches!(unit.as_str(), "" | "energy") {
                return refuse(format!("the column `{name}` has the unit `{unit}`; units are `energy` or none"));
            }
            if width != 1 {
                return refuse(format!("the column `{name}` has {width} numbers a measurement; tables hold one"));
            }
            let invariant = flags & SL_COLUMN_INVARIANT != 0;
            columns.push(ColumnSpec { name, unit, invariant, about: String::new() });
            Ok(())
        })
    }
}
