//! Gates: does something drive each of them, in every mode?

use super::DeviceView;
use crate::expr::Value;

impl DeviceView<'_> {
    /// Whether the gate's net is driven: some conducting path ties it to a rail, and in every mode one of these paths can
    /// conduct. Unknown where it hangs on a port or global of the top that no rail declares, or where
    /// the deck declares none at all: what drives such a netlist stands outside of it.
    pub(super) fn gate_driven(&self) -> Value {
        let Some((pin, net)) = self.class.pin("g").and_then(|pin| Some((pin, self.net(pin)?))) else {
            return Value::Bool(true);
        };
        let reach = self.world.reach;
        let untied = reach.is_untied(self.at, net);
        let off: Vec<usize> = (0..reach.modes.len()).filter(|&mode| !reach.is_driven(self.at, mode, net)).collect();
        if !untied && off.is_empty() {
            return Value::Bool(true);
        }
        let named: Vec<String> = off.iter().filter_map(|&mode| reach.mode_name(mode)).map(str::to_owned).collect();
        let how = match (untied, named.as_slice()) {
            (true, _) => "no path leads from it to any rail".to_owned(),
            (false, []) => "every path from it to a rail is off".to_owned(),
            (false, modes) => format!("every path from it to a rail is off in mode {}", modes.join(", ")),
        };
        self.note(|evidence| {
            evidence.pins = vec![pin];
            evidence.pairs = vec!["g".to_owned()];
            evidence.mode = named.first().cloned();
            evidence.modes = if untied { Vec::new() } else { named.clone() };
            evidence.values = vec![("how".into(), how.clone())];
        });
        if reach.is_open(self.at, net) {
            let net = self.net_text(pin).to_owned();
            return self.unknown(format!("net `{net}` leads to a port or global of the top that no rail declares"));
        }
        if self.world.deck.rails.is_empty() && self.world.deck.modes.is_empty() {
            return self.unknown("the deck declares no rails".to_owned());
        }
        Value::Bool(false)
    }
}
