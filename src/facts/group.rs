//! Structures of several devices as subjects of rules: mirrors, one for each output, and pairs.

use super::{DeviceView, Evidence, World};
use crate::declared::Class;
use crate::design::DeviceIx;
use crate::expr::Value;
use crate::quantity::Dim;
use crate::reach::ReachIx;
use crate::roles::{Member, Standing, Unit};
use crate::source::Span;
use std::cell::RefCell;
use std::rc::Rc;

/// A structure around one device, with the devices that rules may name in it.
pub struct GroupView<'w> {
    /// Its devices by the name that rules use: `ref` and `out`, or `left`, `right` and `tail`.
    pub members: Vec<(&'static str, DeviceView<'w>)>,
    evidence: RefCell<Evidence>,
}

/// A mirror's names for its devices: the output that stands for it, and its reference (of several, one of another class goes first).
pub const MIRROR: [&str; 2] = ["out", "ref"];

/// A pair's names for its devices. The tail is left out where it is no device of a class.
pub const PAIR: [&str; 3] = ["left", "right", "tail"];

impl<'w> GroupView<'w> {
    /// The mirror whose output a device is; none where it is no output, or the reference stands outside of the netlist.
    pub fn mirror(view: DeviceView<'w>) -> Result<GroupView<'w>, Box<DeviceView<'w>>> {
        let unit = view.unit();
        let mirror = view.walk().borrow_mut().mirror(unit);
        let references = mirror.filter(|mirror| mirror.member == Member::Output).map(|mirror| mirror.references);
        // Of several references the one that fits the output worst, and of those the first by its path, stands for all.
        let reference = references.into_iter().flatten().min_by_key(|&reference| {
            let walk = view.walk().borrow();
            (walk.class(reference).is_some_and(|class| class.name == view.class.name), walk.unit_path(reference))
        });
        match reference.and_then(|unit| view.beside(unit)) {
            Some(reference) => Ok(GroupView::of(vec![(MIRROR[0], view), (MIRROR[1], reference)])),
            None => Err(Box::new(view)),
        }
    }

    /// The pair whose left half a device is.
    pub fn pair(view: DeviceView<'w>) -> Result<GroupView<'w>, Box<DeviceView<'w>>> {
        let unit = view.unit();
        let pair = view.walk().borrow_mut().pair(unit);
        let Some(pair) = pair.filter(|pair| pair.left.first() == Some(&unit)) else {
            return Err(Box::new(view));
        };
        let Some(right) = pair.right.first().and_then(|&unit| view.beside(unit)) else {
            return Err(Box::new(view));
        };
        let tail = pair.tail.first().and_then(|&unit| view.beside(unit));
        let mut members = vec![(PAIR[0], view), (PAIR[1], right)];
        members.extend(tail.map(|tail| (PAIR[2], tail)));
        Ok(GroupView::of(members))
    }

    fn of(members: Vec<(&'static str, DeviceView<'w>)>) -> GroupView<'w> {
        GroupView { members, evidence: RefCell::default() }
    }

    /// The device that the structure is reported at.
    pub fn main(&self) -> &DeviceView<'w> {
        &self.members[0].1
    }

    /// Gives the device that it is reported at back, to go on from there.
    pub fn into_main(mut self) -> DeviceView<'w> {
        self.members.swap_remove(0).1
    }

    /// One of its devices.
    pub fn member(&self, name: &str) -> Option<&DeviceView<'w>> {
        self.members.iter().find(|(known, _)| *known == name).map(|(_, view)| view)
    }

    /// A device's attribute by its full name (`ref.class.name`).
    pub(super) fn of_member(&self, name: &str) -> Option<Value> {
        let (member, rest) = name.split_once('.')?;
        Some(match self.member(member) {
            Some(view) => crate::expr::Scope::name(view, rest),
            None => self.unknown("its current comes from something that is no device of a class"),
        })
    }

    /// By how much the output repeats the reference's current: the ratio of width × copies / length.
    pub(super) fn ratio(&self) -> Value {
        let strength = |view: &DeviceView<'_>| {
            let sizes = view.sizes();
            let total = sizes.width.as_ref().ok()? * sizes.copies.as_ref().ok()? / sizes.length.as_ref().ok()?;
            (total > 0.0 && total.is_finite()).then_some(total)
        };
        let (out, reference) = (self.member(MIRROR[0]).and_then(strength), self.member(MIRROR[1]).and_then(strength));
        match (out, reference) {
            (Some(out), Some(reference)) => Value::Number { value: out / reference, dim: Dim::NONE },
            _ => self.unknown("a size is not known"),
        }
    }

    fn unknown(&self, why: &str) -> Value {
        self.evidence.borrow_mut().unknown(why);
        Value::Unknown
    }

    /// Where one of its devices stands.
    pub fn place_of_member(&self, key: &str) -> Option<Span> {
        match key {
            "name" | "model" => self.main().place(key),
            member => self.member(member)?.place("name"),
        }
    }

    /// Takes the notes made so far, those of its devices with them.
    pub fn take_evidence(&self) -> Evidence {
        let mut all = self.evidence.take();
        for (_, view) in &self.members {
            let own = view.take_evidence();
            all.why.extend(own.why);
            all.places.extend(own.places);
            all.undeclared |= own.undeclared;
        }
        all
    }
}

impl<'w> DeviceView<'w> {
    /// A view of a device that the walk around this one has met; none where it has no class.
    pub(super) fn beside(&self, unit: Unit) -> Option<DeviceView<'w>> {
        let around = self.around();
        let (at, class) = {
            let walk = around.walker.borrow();
            (walk.spot(unit.spot).at, walk.class(unit)?)
        };
        let mut view = DeviceView::of(self.world, at, unit.device, class, self.in_words);
        view.standing = self.standing.clone();
        let _ = view.walk.set(Rc::clone(around));
        let _ = view.unit.set(unit);
        Some(view)
    }

    /// Looks at a device where an earlier view saw it ([`DeviceView::standing`]).
    pub fn seen_from(
        world: World<'w>,
        at: ReachIx,
        device: DeviceIx,
        class: &'w Class,
        standing: Option<&Standing>,
    ) -> DeviceView<'w> {
        let mut view = DeviceView::new(world, at, device, class);
        view.standing = standing.cloned().unwrap_or(view.standing);
        view
    }
}
