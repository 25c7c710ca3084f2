//! Tables of update rules and observables.
//!
//! # What the host keeps to
//! Every function here is reached through a table only, by a host that keeps to the rules of `spinledger_abi`: items and instances are those
//! that `create` and `prepare` of the same table handed out and that were not freed, an instance is used by one call at a time, and structs,
//! slices and messages are valid for the call. That is the reason behind each block that says so. What a plugin's own safe code says (lanes,
//! views, columns) is checked or asked for once, and never believed as a length.
//!
//! # Why `'static` instances are sound
//! An item's `prepare` is written for every lifetime, so that an author can keep nothing of lattice and Hamiltonian but in the instance, whose
//! type has the lifetime in it. The border picks `'static` for it, since no shorter one can be written down in a table, and the host keeps rule,
//! lattice, Hamiltonian and services until it has released the instance. An instance is nowhere handed to the author's code as `'static`: the
//! traits' functions are written for every lifetime too.

use super::items::{borrow, create, destroy, hand_out};
use super::raw::{energy, graph, host, sized, slice, view};
use super::status::{guard, heed};
use crate::{
    ColumnInfo, Error, Observable, ObservableInstance, Prepare, Problem, Result, Spins, Tallies, Update, UpdateInstance,
};
use spinledger_abi as abi;
use spinledger_numerics::random::StreamKey;
use std::ffi::c_void;
use std::marker::PhantomData;

/// An instance of a rule with what the border must know to check and to size slices.
struct Chains<I> {
    instance: I,
    lanes: usize,
    sites: usize,
    components: usize,
}

/// An instance of an observable with its columns, asked for once: room for numbers is made by what the host was told.
struct Measured<I> {
    instance: I,
    columns: Vec<ColumnInfo>,
}

impl<I> Measured<I> {
    /// Numbers that it writes.
    fn width(&self) -> usize {
        self.columns.iter().map(|column| column.width).sum()
    }
}

/// An instance that the host hands back.
///
/// # Safety
/// `instance` is null or from `hand_out::<T>`, lives for `'a`, and nobody else uses it meanwhile.
unsafe fn borrow_mut<'a, T>(instance: *mut c_void) -> Result<&'a mut T> {
    // SAFETY: as the caller promises.
    unsafe { instance.cast::<T>().as_mut() }.ok_or_else(|| Error::new("the host named no instance"))
}

/// The table of an update rule.
pub struct Updates<U>(PhantomData<U>);

impl<U: Update> Updates<U> {
    /// The functions.
    pub const TABLE: &'static abi::SlUpdate = &abi::SlUpdate {
        size: size_of::<abi::SlUpdate>(),
        create: Some(Self::create),
        destroy: Some(destroy::<U>),
        prepare: Some(Self::prepare),
        release: Some(destroy::<Chains<U::Instance<'static>>>),
        import: Some(Self::import),
        export: Some(Self::export),
        sweep: Some(Self::sweep),
        view: Some(Self::view),
        tallies: Some(Self::tallies),
        save: Some(Self::save),
        restore: Some(Self::restore),
        adapt: Some(Self::adapt),
        path: Some(Self::path),
    };

    /// A chain's instance, if there is such a chain.
    ///
    /// # Safety
    /// As for [`borrow`].
    unsafe fn chains<'a>(instance: *const c_void, lane: usize) -> Result<&'a Chains<U::Instance<'static>>> {
        // SAFETY: passed on.
        let chains: &Chains<_> = unsafe { borrow(instance) }?;
        Self::lane(chains.lanes, lane)?;
        Ok(chains)
    }

    /// The same, to be changed.
    ///
    /// # Safety
    /// As for [`borrow_mut`].
    unsafe fn chains_mut<'a>(instance: *mut c_void, lane: usize) -> Result<&'a mut Chains<U::Instance<'static>>> {
        // SAFETY: passed on.
        let chains: &mut Chains<_> = unsafe { borrow_mut(instance) }?;
        Self::lane(chains.lanes, lane)?;
        Ok(chains)
    }

    fn lane(lanes: usize, lane: usize) -> Result<()> {
        if lane < lanes { Ok(()) } else { Err(Error::new(format!("there is no chain {lane} among {lanes}"))) }
    }

    unsafe extern "C" fn create(
        _host: *const abi::SlHost,
        parameters: *const abi::SlValue,
        item: *mut *mut c_void,
        message: *mut abi::SlMessage,
    ) -> i32 {
        // SAFETY: the host keeps to the interface.
        unsafe { create(U::new, parameters, item, message) }
    }

    unsafe extern "C" fn prepare(
        rule: *const c_void,
        prepare: *const abi::SlPrepare,
        instance: *mut *mut c_void,
        message: *mut abi::SlMessage,
    ) -> i32 {
        // SAFETY: the host keeps to the interface; rule, graph, energy and services outlive the instance (see the head of this file).
        unsafe {
            guard(message, || {
                let raw: &'static abi::SlPrepare = sized(prepare, "preparation")?;
                let key = |key: &abi::SlKey| StreamKey(key.bytes);
                let problem = Problem { graph: graph(raw.graph)?, energy: energy(raw.graph, raw.energy)? };
                let (sites, components) = (problem.graph.total, problem.energy.components);
                let prepare = Prepare {
                    host: host(raw.host)?,
                    problem,
                    inverse_temperature: raw.inverse_temperature,
                    lane_keys: slice(raw.lane_keys, raw.lanes).iter().map(key).collect(),
                    group_key: key(&raw.group_key),
                };
                let made = borrow::<'static, U>(rule)?.prepare(prepare)?;
                hand_out(Box::new(Chains { instance: made, lanes: raw.lanes, sites, components }), instance)
            })
        }
    }

    unsafe extern "C" fn import(
        instance: *mut c_void,
        lane: usize,
        shown: *const abi::SlView,
        message: *mut abi::SlMessage,
    ) -> i32 {
        // SAFETY: the host keeps to the interface.
        unsafe {
            guard(message, || {
                let chains = Self::chains_mut(instance, lane)?;
                Ok(chains.instance.import(lane, &view(shown)?)?)
            })
        }
    }

    unsafe extern "C" fn export(
        instance: *const c_void,
        lane: usize,
        spins: *const abi::SlSpins,
        message: *mut abi::SlMessage,
    ) -> i32 {
        // SAFETY: the host keeps to the interface: room for `sites` states, or as many vectors of the model's components.
        unsafe {
            guard(message, || {
                let chains = Self::chains(instance, lane)?;
                let raw: &abi::SlSpins = sized(spins, "place for a configuration")?;
                if raw.sites != chains.sites {
                    return Err(Error::new("the host's place for a configuration has another number of sites").into());
                }
                let mut spins = match chains.components {
                    0 if !raw.states.is_null() => Spins::States(std::slice::from_raw_parts_mut(raw.states, raw.sites)),
                    n if n > 0 && !raw.vectors.is_null() => {
                        Spins::Vectors(std::slice::from_raw_parts_mut(raw.vectors, raw.sites * n))
                    }
                    _ => return Err(Error::new("the host gave no place for this kind of spin").into()),
                };
                chains.instance.export(lane, &mut spins);
                Ok(())
            })
        }
    }

    unsafe extern "C" fn sweep(instance: *mut c_void, count: u64, message: *mut abi::SlMessage) -> i32 {
        // SAFETY: the host keeps to the interface.
        unsafe { guard(message, || Ok(Self::chains_mut(instance, 0)?.instance.sweep(count)?)) }
    }

    unsafe extern "C" fn view(
        instance: *mut c_void,
        lane: usize,
        shown: *mut abi::SlView,
        message: *mut abi::SlMessage,
    ) -> i32 {
        // SAFETY: the host keeps to the interface: it uses the view until its next call only, so the instance is not changed meanwhile.
        unsafe {
            guard(message, || {
                let view = Self::chains_mut(instance, lane)?.instance.view(lane).raw()?;
                match shown.as_mut() {
                    Some(place) => *place = view,
                    None => return Err(Error::new("the host gave no place for a view").into()),
                }
                Ok(())
            })
        }
    }

    unsafe extern "C" fn tallies(instance: *const c_void, lane: usize, tallies: *mut abi::SlTallies) -> i32 {
        // SAFETY: the host keeps to the interface.
        unsafe {
            guard(std::ptr::null_mut(), || {
                let found = Self::chains(instance, lane)?.instance.tallies(lane).raw();
                match tallies.as_mut() {
                    Some(place) => *place = found,
                    None => return Err(Error::new("the host gave no place for tallies").into()),
                }
                Ok(())
            })
        }
    }

    unsafe extern "C" fn save(
        instance: *const c_void,
        sink: *const abi::SlByteSink,
        message: *mut abi::SlMessage,
    ) -> i32 {
        // SAFETY: the host keeps to the interface.
        unsafe {
            guard(message, || {
                let mut bytes = Vec::new();
                Self::chains(instance, 0)?.instance.save(&mut bytes);
                let sink = sized(sink, "sink for bytes")?;
                match sink.write {
                    Some(write) => heed(write(sink.context, bytes.as_ptr(), bytes.len())),
                    None => Err(Error::new("the host takes no bytes").into()),
                }
            })
        }
    }

    unsafe extern "C" fn restore(
        instance: *mut c_void,
        data: *const u8,
        count: usize,
        message: *mut abi::SlMessage,
    ) -> i32 {
        // SAFETY: the host keeps to the interface.
        unsafe { guard(message, || Ok(Self::chains_mut(instance, 0)?.instance.restore(slice(data, count))?)) }
    }

    unsafe extern "C" fn adapt(instance: *mut c_void, on: i32) -> i32 {
        // SAFETY: the host keeps to the interface.
        unsafe {
            guard(std::ptr::null_mut(), || {
                Self::chains_mut(instance, 0)?.instance.adapt(on != 0);
                Ok(())
            })
        }
    }

    unsafe extern "C" fn path(instance: *const c_void, path: *mut abi::SlText) -> i32 {
        // SAFETY: the host keeps to the interface: it copies the text before its next call, so the instance is not changed meanwhile.
        unsafe {
            guard(std::ptr::null_mut(), || {
                let text = Self::chains(instance, 0)?.instance.path();
                match path.as_mut() {
                    Some(place) => *place = abi::SlText { data: text.as_ptr(), length: text.len() },
                    None => return Err(Error::new("the host gave no place for a text").into()),
                }
                Ok(())
            })
        }
    }
}

/// The table of an observable.
pub struct Observables<O>(PhantomData<O>);

impl<O: Observable> Observables<O> {
    /// The functions.
    pub const TABLE: &'static abi::SlObservable = &abi::SlObservable {
        size: size_of::<abi::SlObservable>(),
        create: Some(Self::create),
        destroy: Some(destroy::<O>),
        views: O::SPEC.views,
        chains: O::SPEC.chains as u32,
        prepare: Some(Self::prepare),
        release: Some(destroy::<Measured<O::Instance<'static>>>),
        columns: Some(Self::columns),
        measure: Some(Self::measure),
    };

    unsafe extern "C" fn create(
        _host: *const abi::SlHost,
        parameters: *const abi::SlValue,
        item: *mut *mut c_void,
        message: *mut abi::SlMessage,
    ) -> i32 {
        // SAFETY: the host keeps to the interface.
        unsafe { create(O::new, parameters, item, message) }
    }

    unsafe extern "C" fn prepare(
        observable: *const c_void,
        services: *const abi::SlHost,
        raw: *const abi::SlGraph,
        hamiltonian: *const abi::SlEnergy,
        instance: *mut *mut c_void,
        message: *mut abi::SlMessage,
    ) -> i32 {
        // SAFETY: the host keeps to the interface; observable, graph, energy and host outlive the instance.
        unsafe {
            guard(message, || {
                let problem = Problem { graph: graph(raw)?, energy: energy(raw, hamiltonian)? };
                let made = borrow::<'static, O>(observable)?.prepare(host(services)?, problem)?;
                let columns = made.columns();
                hand_out(Box::new(Measured { instance: made, columns }), instance)
            })
        }
    }

    unsafe extern "C" fn columns(
        instance: *const c_void,
        sink: *const abi::SlColumnSink,
        message: *mut abi::SlMessage,
    ) -> i32 {
        // SAFETY: the host keeps to the interface; texts live for the call.
        unsafe {
            guard(message, || {
                let sink = sized(sink, "sink for columns")?;
                let Some(take) = sink.column else { return Err(Error::new("the host takes no columns").into()) };
                let text = |text: &str| abi::SlText { data: text.as_ptr(), length: text.len() };
                for column in &borrow::<Measured<O::Instance<'static>>>(instance)?.columns {
                    let flags = if column.invariant { abi::SL_COLUMN_INVARIANT } else { 0 };
                    heed(take(sink.context, text(&column.name), text(&column.unit), flags, column.width as u32))?;
                }
                Ok(())
            })
        }
    }

    unsafe extern "C" fn measure(
        instance: *mut c_void,
        views: *const abi::SlView,
        tallies: *const abi::SlTallies,
        values: *mut f64,
        message: *mut abi::SlMessage,
    ) -> i32 {
        // SAFETY: the host keeps to the interface: as many views and tallies as the table's `chains`, room for all columns.
        unsafe {
            guard(message, || {
                let measured: &mut Measured<O::Instance<'static>> = borrow_mut(instance)?;
                let chains = O::SPEC.chains as usize;
                if views.is_null() || tallies.is_null() || values.is_null() {
                    return Err(Error::new("the host gave nothing to measure").into());
                }
                let shown = (0..chains).map(|c| view(views.add(c))).collect::<Result<Vec<_>>>()?;
                let tallies: Vec<Tallies> = slice(tallies, chains).iter().map(Tallies::from_raw).collect();
                let values = std::slice::from_raw_parts_mut(values, measured.width());
                Ok(measured.instance.measure(&shown, &tallies, values)?)
            })
        }
    }
}
