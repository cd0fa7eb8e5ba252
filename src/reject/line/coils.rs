//! Which coil belongs to which outlet, and the requests that a switch amounts to.

use super::LineError;
use super::modbus::Frame;
use crate::reject::Switch;
use crate::reject::outlets::{MAX_OUTLETS, Outlets};

/// The coils of one device.
#[derive(Clone, Debug)]
pub struct Coils {
    unit: u8,
    /// `(coil, outlet)`, smallest coil first.
    sorted: Vec<(u16, usize)>,
}

/// One request and what it means.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(super) struct Request {
    pub(super) frame: Frame,
    /// Outlets that it is sent for.
    pub(super) changed: Outlets,
    /// Outlets whose state it names: these, and those between them.
    pub(super) named: Outlets,
    /// Those of them that it switches on.
    pub(super) on: Outlets,
}

/// Which function a request uses.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(super) enum Style {
    /// FC05 for one coil, FC15 for several side by side.
    Short,
    /// FC15 even for one coil.
    Many,
    /// FC05 only, for devices that know nothing else.
    Single,
}

impl Coils {
    /// `coils` holds the coil of each outlet. Unit is 1 to 247.
    pub fn new(unit: u8, coils: &[u16]) -> Result<Self, LineError> {
        if coils.len() > MAX_OUTLETS {
            let came = coils.len();
            return Err(LineError::TooManyOutlets { came });
        }
        let mut sorted: Vec<_> = coils.iter().copied().zip(0..).collect();
        sorted.sort_unstable();
        match sorted.windows(2).find(|pair| pair[0].0 == pair[1].0) {
            Some(pair) => Err(LineError::CoilTwice { coil: pair[0].0 }),
            None => Ok(Self { unit, sorted }),
        }
    }

    /// All outlets.
    pub fn outlets(&self) -> Outlets {
        Outlets::first(self.sorted.len())
    }

    /// The coils of `outlets`, smallest first.
    pub fn of(&self, outlets: Outlets) -> Vec<u16> {
        let ours = self.sorted.iter().filter(|c| outlets.has(c.1));
        ours.map(|c| c.0).collect()
    }

    /// The requests of a switch; `single` for a device that does not know FC15.
    pub(super) fn switch(&self, switch: &Switch, single: bool) -> impl Iterator<Item = Request> {
        let style = if single { Style::Single } else { Style::Short };
        self.requests(switch.changed, switch.on, self.outlets(), style)
    }

    /// The requests that turn everything off. FC15 even for one coil: its answer differs from it, so that an adapter
    /// which only sends back what it is sent cannot pass for a device.
    pub(super) fn all_off(&self, single: bool) -> impl Iterator<Item = Request> {
        let style = if single { Style::Single } else { Style::Many };
        self.requests(self.outlets(), Outlets::NONE, Outlets::NONE, style)
    }

    /// The requests that bring `changed` to the state in `on`, smallest coil first. A request may name further outlets
    /// between those that change, as far as they are in `may_name`; never a coil that is not ours.
    pub(super) fn requests(
        &self,
        changed: Outlets,
        on: Outlets,
        may_name: Outlets,
        style: Style,
    ) -> impl Iterator<Item = Request> {
        let mut rest = self.sorted.as_slice();
        std::iter::from_fn(move || {
            let first = rest.iter().position(|c| changed.has(c.1))?;
            let group = match style {
                Style::Single => &rest[first..=first],
                Style::Short | Style::Many => neighbours(&rest[first..], changed, may_name),
            };
            rest = &rest[first + group.len()..];
            Some(self.request(group, changed, on, style))
        })
    }

    fn request(
        &self,
        group: &[(u16, usize)],
        changed: Outlets,
        on: Outlets,
        style: Style,
    ) -> Request {
        let outlets = group.iter().map(|coil| coil.1);
        let named = outlets.fold(Outlets::NONE, Outlets::with);
        let first = group[0].0;
        let frame = if group.len() == 1 && style != Style::Many {
            Frame::write_coil(self.unit, first, on.has(group[0].1))
        } else {
            let mut states = [false; MAX_OUTLETS];
            for (state, coil) in states.iter_mut().zip(group) {
                *state = on.has(coil.1);
            }
            Frame::write_coils(self.unit, first, &states[..group.len()])
        };
        Request {
            frame,
            changed: changed.within(named),
            named,
            on: on.within(named),
        }
    }
}

/// The longest start of `coils` without a gap and without an outlet that may not be named, up to its last change.
fn neighbours(coils: &[(u16, usize)], changed: Outlets, may_name: Outlets) -> &[(u16, usize)] {
    let mut len = 1;
    for i in 1..coils.len() {
        let (coil, outlet) = coils[i];
        let usable = changed.and(may_name).has(outlet);
        if coil - coils[i - 1].0 != 1 || !usable {
            break;
        }
        if changed.has(outlet) {
            len = i + 1;
        }
    }
    &coils[..len]
}

#[cfg(test)]
mod tests {
    use super::*;

    fn frames(coils: &[u16], changed: &[usize], on: &[usize], style: Style) -> Vec<String> {
        let set = |of: &[usize]| of.iter().copied().fold(Outlets::NONE, Outlets::with);
        let coils = Coils::new(1, coils).unwrap();
        let all = coils.outlets();
        let requests = coils.requests(set(changed), set(on), all, style);
        requests.map(|r| r.frame.to_string()).collect()
    }

    fn coil(coil: u16, on: bool) -> String {
        Frame::write_coil(1, coil, on).to_string()
    }

    fn coils(first: u16, states: &[bool]) -> String {
        Frame::write_coils(1, first, states).to_string()
    }

    #[test]
    fn neighbours_share_a_request_and_others_do_not() {
        let frames = |ours, changed, on| frames(ours, changed, on, Style::Short);
        assert_eq!(frames(&[4], &[0], &[0]), [coil(4, true)]);
        // In the order of the coils, whatever the order of the outlets.
        assert_eq!(frames(&[5, 4], &[0, 1], &[1]), [coils(4, &[true, false])]);
        // Coil 6 is ours and keeps its state.
        assert_eq!(
            frames(&[5, 6, 7], &[0, 2], &[1, 2]),
            [coils(5, &[false, true, true])]
        );
        // Coil 6 is not ours.
        assert_eq!(
            frames(&[5, 7], &[0, 1], &[0, 1]),
            [coil(5, true), coil(7, true)]
        );
        assert_eq!(
            frames(&[1, 2, 9, 10, 30], &[0, 1, 2, 3, 4], &[]),
            [
                coils(1, &[false; 2]),
                coils(9, &[false; 2]),
                coil(30, false)
            ]
        );
        assert!(frames(&[1, 2], &[], &[0]).is_empty());
    }

    #[test]
    fn the_style_chooses_the_function() {
        assert_eq!(frames(&[3], &[0], &[], Style::Many), [coils(3, &[false])]);
        assert_eq!(
            frames(&[3, 4], &[0, 1], &[1], Style::Single),
            [coil(3, false), coil(4, true)]
        );
    }

    #[test]
    fn an_outlet_that_may_not_be_named_parts_a_request() {
        let ours = Coils::new(1, &[0, 1, 2]).unwrap();
        let outer = Outlets::one(0).with(2);
        let requests = ours.requests(outer, Outlets::NONE, Outlets::NONE, Style::Short);
        let frames: Vec<_> = requests.map(|r| r.frame.to_string()).collect();
        assert_eq!(frames, [coil(0, false), coil(2, false)]);
    }

    #[test]
    fn a_coil_belongs_to_one_outlet() {
        let twice = Coils::new(1, &[3, 8, 3]).unwrap_err();
        assert!(matches!(twice, LineError::CoilTwice { coil: 3 }));
        assert!(Coils::new(1, &[0; MAX_OUTLETS + 1]).is_err());
        assert!(Coils::new(1, &[u16::MAX, u16::MAX - 1]).is_ok());
    }
}
