//! What the last screens of some blocks found, so that an edit elsewhere costs no numerics and a
//! change of values alone starts from the plan and the modes before it.

use crate::cancel::{Cancel, Cancelled};
use crate::circuit::{Circuit, PartId};
use crate::stability::{Earlier, Screen, ScreenRequest, screen_from};
use crate::text::FileId;
use std::collections::VecDeque;
use std::sync::{Arc, Mutex, PoisonError};

/// Blocks that are remembered; the one used longest ago makes room.
const SLOTS: usize = 32;

/// Which block of which netlist.
#[derive(Clone, PartialEq, Eq, Debug)]
struct Key {
    root: FileId,
    block: String,
}

/// A request that was answered, without its borrowed circuit.
#[derive(Clone, PartialEq, Debug)]
struct Asked {
    circuit: Circuit,
    claims: Vec<Vec<PartId>>,
    judged: Option<Vec<PartId>>,
    sweep_hz: Option<[f64; 2]>,
    default_sweep_hz: [f64; 2],
    states: usize,
}

impl Asked {
    fn new(request: &ScreenRequest<'_>) -> Self {
        Self {
            circuit: request.circuit.clone(),
            claims: request.claims.clone(),
            judged: request.judged.map(<[PartId]>::to_vec),
            sweep_hz: request.sweep_hz,
            default_sweep_hz: request.default_sweep_hz,
            states: request.states,
        }
    }

    fn is(&self, request: &ScreenRequest<'_>) -> bool {
        self.circuit == *request.circuit
            && self.claims == request.claims
            && self.judged.as_deref() == request.judged
            && self.sweep_hz == request.sweep_hz
            && self.default_sweep_hz == request.default_sweep_hz
            && self.states == request.states
    }
}

#[derive(Debug)]
struct Slot {
    key: Key,
    asked: Asked,
    screen: Arc<Screen>,
    earlier: Option<Earlier>,
}

/// Shared by a host and its clones.
#[derive(Debug, Default)]
pub(super) struct Memo {
    slots: Mutex<VecDeque<Slot>>,
}

impl Memo {
    /// The screen of a block: remembered when the request is the same, else computed.
    ///
    /// # Errors
    /// [`Cancelled`] when the flag was set before the end; nothing is remembered then.
    pub(super) fn screen(
        &self,
        root: FileId,
        block: &str,
        request: &ScreenRequest<'_>,
        cancel: &Cancel,
    ) -> Result<Arc<Screen>, Cancelled> {
        let key = Key {
            root,
            block: block.to_owned(),
        };
        let before = self.take(&key);
        if let Some(slot) = &before
            && slot.asked.is(request)
        {
            let screen = Arc::clone(&slot.screen);
            self.put(before);
            return Ok(screen);
        }
        let earlier = before.as_ref().and_then(|slot| slot.earlier.as_ref());
        let found = screen_from(request, earlier, cancel);
        let (screen, earlier) = match found {
            Ok(found) => found,
            Err(cancelled) => {
                self.put(before);
                return Err(cancelled);
            }
        };
        let screen = Arc::new(screen);
        self.put(Some(Slot {
            key,
            asked: Asked::new(request),
            screen: Arc::clone(&screen),
            earlier,
        }));
        Ok(screen)
    }

    fn take(&self, key: &Key) -> Option<Slot> {
        // The slots stay whole whatever happened to another thread.
        let mut slots = self.slots.lock().unwrap_or_else(PoisonError::into_inner);
        let at = slots.iter().position(|slot| slot.key == *key)?;
        slots.remove(at)
    }

    fn put(&self, slot: Option<Slot>) {
        let Some(slot) = slot else { return };
        let mut slots = self.slots.lock().unwrap_or_else(PoisonError::into_inner);
        slots.retain(|other| other.key != slot.key);
        slots.push_back(slot);
        if slots.len() > SLOTS {
            slots.pop_front();
        }
    }
}

#[cfg(test)]
mod tests {
    use crate::cancel::Cancel;
    use crate::host::{FileRole, Host, Screening, SourceText};
    use std::time::Duration;

    const TEXT: &str = "Beacon oscillator\n*~ block osc in=RL\nCg g 0 200p\nL1 g d 1u\nCd d 0 100p\nRL d 0 1k\nG1 d 0 g 0 2.5m\n";

    fn host() -> Host {
        Host::new(|| Duration::ZERO)
    }

    fn screen(host: &Host, file: crate::text::FileId) -> Screening {
        host.prepare(file).screen(&Cancel::new()).expect("no stop")
    }

    fn screened_fresh(text: &str) -> Screening {
        let mut host = host();
        let file = host.add_file(SourceText::new(text), FileRole::Top);
        screen(&host, file)
    }

    #[test]
    fn comments_cost_no_numerics() {
        let mut host = host();
        let file = host.add_file(SourceText::new(TEXT), FileRole::Top);
        let first = screen(&host, file);
        let before = std::sync::Arc::as_ptr(&host.memo.slots.lock().expect("whole")[0].screen);
        let text = TEXT.replace("Cg g", "* on the lid\n\nCg g");
        host.set_text(file, SourceText::new(text.as_str()));
        let second = screen(&host, file);
        let after = std::sync::Arc::as_ptr(&host.memo.slots.lock().expect("whole")[0].screen);
        assert_eq!(before, after, "the same screen, not a new one");
        assert_eq!(first.blocks[0].modes, second.blocks[0].modes);
        assert_eq!(second, screened_fresh(&text));
    }

    #[test]
    fn values_are_followed_and_a_stop_loses_nothing() {
        let mut host = host();
        let file = host.add_file(SourceText::new(TEXT), FileRole::Top);
        let unstable = |screening: &Screening| screening.blocks[0].unstable_modes;
        assert_eq!(unstable(&screen(&host, file)), Some(2));
        for (gm, expected) in [("2.1m", 2), ("1.9m", 0), ("0", 0), ("40m", 2)] {
            let text = TEXT.replace("2.5m", gm);
            host.set_text(file, SourceText::new(text.as_str()));
            let stopped = Cancel::new();
            stopped.set();
            assert!(host.prepare(file).screen(&stopped).is_err());
            let found = screen(&host, file);
            assert_eq!(unstable(&found), Some(expected), "gm = {gm}");
            let fresh = screened_fresh(&text);
            assert_eq!(found.blocks[0].verdict, fresh.blocks[0].verdict);
            for (a, b) in found.blocks[0].modes.iter().zip(&fresh.blocks[0].modes) {
                let gap = (a.hz - b.hz).hypot(a.growth_per_s - b.growth_per_s);
                assert!(
                    gap <= 1e-10 * b.hz.hypot(b.growth_per_s),
                    "gm = {gm}: {gap:e}"
                );
            }
        }
    }

    #[test]
    fn another_network_under_the_same_name_is_another_screen() {
        let mut host = host();
        let file = host.add_file(SourceText::new(TEXT), FileRole::Top);
        screen(&host, file);
        let text = TEXT.replace("L1 g d 1u", "L1 g m 1u\nRm m d 100");
        host.set_text(file, SourceText::new(text.as_str()));
        assert_eq!(screen(&host, file), screened_fresh(&text));
    }
}
