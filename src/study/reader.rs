//! Reading a study's document from JSON, with a pointer for every fault.

use serde::de::DeserializeOwned;
use serde_json::{Map, Value};

use super::document::{
    CrossCovariance, Demand, Document, Headline, Interval, SampleBounds, default_level,
};
use super::options::{
    ArdlOptions, AutoregressiveOptions, DolsOptions, JohansenOptions, SimulationOptions,
    SystemOptions, default_draws, default_seed,
};
use crate::constraint::IntervalMethod;
use crate::document::Reader;
use crate::finding::Finding;

/// The document, or every fault found.
pub(super) fn read(value: &Value) -> Result<Document, Vec<Finding>> {
    let mut reader = Reader::default();
    let document = reader.document(value);
    reader.finish(document)
}

impl Reader {
    fn document(&mut self, value: &Value) -> Option<Document> {
        let known = [
            "title",
            "area",
            "frequency",
            "headline",
            "forms",
            "estimators",
            "sample",
            "activity",
            "actual",
            "import_demand",
            "export_demand",
            "terms_of_trade",
            "covariance",
            "lags",
            "small_sample",
            "interval",
            "ardl",
            "dols",
            "autoregressive_errors",
            "seemingly_unrelated",
            "johansen",
            "simulation",
        ];
        let map = self.object(value, "", &known)?;
        // Every field is read before any fault returns, so that all faults are reported at once.
        let title = self.field(map, "", "title");
        let area = self.field(map, "", "area");
        let frequency = self.field(map, "", "frequency");
        let headline = self.headline(map);
        let forms = self.list(map, "forms");
        let estimators = self.list(map, "estimators");
        let sample = self.sample(map);
        let activity = self.field(map, "", "activity");
        let actual = self.field(map, "", "actual");
        let import_demand = self.demand(map, "import_demand");
        let export_demand = self.demand(map, "export_demand");
        let terms_of_trade = self.field(map, "", "terms_of_trade");
        let covariance = self.field(map, "", "covariance");
        let lags = self.field(map, "", "lags");
        let small_sample = self.field(map, "", "small_sample");
        let interval = self.interval(map);
        let ardl = self.ardl(map);
        let dols = self.options(map, "dols", &["leads", "lags"], |reader, map| {
            let leads = reader.field(map, "/dols", "leads");
            let lags = reader.field(map, "/dols", "lags");
            Some(DolsOptions {
                leads: leads?,
                lags: lags?,
            })
        });
        let name = "autoregressive_errors";
        let autoregressive_errors =
            self.options(map, name, &["first_observation"], |reader, map| {
                let first_observation =
                    reader.field(map, "/autoregressive_errors", "first_observation")?;
                Some(AutoregressiveOptions { first_observation })
            });
        let seemingly_unrelated =
            self.options(map, "seemingly_unrelated", &["iterate"], |reader, map| {
                let iterate = reader.field(map, "/seemingly_unrelated", "iterate")?;
                Some(SystemOptions { iterate })
            });
        let johansen = self.options(map, "johansen", &["lags", "case"], |reader, map| {
            let lags = reader.field(map, "/johansen", "lags");
            let case = reader.field(map, "/johansen", "case");
            Some(JohansenOptions {
                lags: lags?,
                case: case?,
            })
        });
        let simulation = self.options(map, "simulation", &["draws", "seed"], |reader, map| {
            let draws = reader.field::<Option<u32>>(map, "/simulation", "draws");
            let seed = reader.field::<Option<u32>>(map, "/simulation", "seed");
            Some(SimulationOptions {
                draws: draws?.unwrap_or_else(default_draws),
                seed: seed?.unwrap_or_else(default_seed),
            })
        });
        Some(Document {
            title: title?,
            area: area?,
            frequency: frequency?,
            headline: headline?,
            forms: forms?,
            estimators: estimators?,
            sample: sample?,
            activity: activity?,
            actual: actual?,
            import_demand: import_demand?,
            export_demand: export_demand?,
            terms_of_trade: terms_of_trade?,
            covariance: covariance?,
            lags: lags?,
            small_sample: small_sample?,
            interval: interval?,
            ardl: ardl?,
            dols: dols?,
            autoregressive_errors: autoregressive_errors?,
            seemingly_unrelated: seemingly_unrelated?,
            johansen: johansen?,
            simulation: simulation?,
        })
    }

    fn ardl(&mut self, map: &Map<String, Value>) -> Option<Option<ArdlOptions>> {
        let known = [
            "case",
            "criterion",
            "max_lags",
            "import_orders",
            "export_orders",
        ];
        self.options(map, "ardl", &known, |reader, map| {
            let case = reader.field(map, "/ardl", "case");
            let criterion = reader.field(map, "/ardl", "criterion");
            let max_lags = reader.field(map, "/ardl", "max_lags");
            let import_orders = reader.field(map, "/ardl", "import_orders");
            let export_orders = reader.field(map, "/ardl", "export_orders");
            Some(ArdlOptions {
                case: case?,
                criterion: criterion?,
                max_lags: max_lags?,
                import_orders: import_orders?,
                export_orders: export_orders?,
            })
        })
    }

    /// An object inside the document that may be absent.
    fn options<T>(
        &mut self,
        map: &Map<String, Value>,
        name: &str,
        known: &[&str],
        read: impl FnOnce(&mut Self, &Map<String, Value>) -> Option<T>,
    ) -> Option<Option<T>> {
        if map.get(name).is_none_or(Value::is_null) {
            return Some(None);
        }
        let map = self.part(map, name, known)?;
        read(self, map).map(Some)
    }

    fn headline(&mut self, map: &Map<String, Value>) -> Option<Headline> {
        let map = self.part(map, "headline", &["form", "estimator"])?;
        let form = self.field(map, "/headline", "form");
        let estimator = self.field(map, "/headline", "estimator");
        Some(Headline {
            form: form?,
            estimator: estimator?,
        })
    }

    fn sample(&mut self, map: &Map<String, Value>) -> Option<SampleBounds> {
        if map.get("sample").is_none_or(Value::is_null) {
            return Some(SampleBounds::default());
        }
        let map = self.part(map, "sample", &["from", "to"])?;
        let from = self.field(map, "/sample", "from");
        let to = self.field(map, "/sample", "to");
        Some(SampleBounds {
            from: from?,
            to: to?,
        })
    }

    fn demand(&mut self, map: &Map<String, Value>, name: &str) -> Option<Demand> {
        let known = [
            "volume",
            "activity",
            "relative_price",
            "further",
            "terms",
            "instruments",
            "endogenous",
        ];
        let map = self.part(map, name, &known)?;
        let pointer = format!("/{name}");
        let volume = self.field(map, &pointer, "volume");
        let activity = self.field(map, &pointer, "activity");
        let relative_price = self.field(map, &pointer, "relative_price");
        let further = self.items(map, &pointer, "further");
        let terms = self.items(map, &pointer, "terms");
        let instruments = self.items(map, &pointer, "instruments");
        let endogenous = self.items(map, &pointer, "endogenous");
        Some(Demand {
            volume: volume?,
            activity: activity?,
            relative_price: relative_price?,
            further: further?,
            terms: terms?,
            instruments: instruments?,
            endogenous: endogenous?,
        })
    }

    fn interval(&mut self, map: &Map<String, Value>) -> Option<Interval> {
        if map.get("interval").is_none_or(Value::is_null) {
            return Some(Interval::default());
        }
        let map = self.part(map, "interval", &["method", "level", "cross_covariance"])?;
        let method = self.field::<Option<IntervalMethod>>(map, "/interval", "method");
        let level = self.field::<Option<f64>>(map, "/interval", "level");
        let cross = self.field::<Option<CrossCovariance>>(map, "/interval", "cross_covariance");
        Some(Interval {
            method: method?.unwrap_or_default(),
            level: level?.unwrap_or_else(default_level),
            cross_covariance: cross?.unwrap_or_default(),
        })
    }

    /// A list that may be absent or empty; every fault points at its element.
    fn items<T: DeserializeOwned>(
        &mut self,
        map: &Map<String, Value>,
        pointer: &str,
        name: &str,
    ) -> Option<Vec<T>> {
        let list = self.field::<Option<Vec<Value>>>(map, pointer, name)?;
        let items: Vec<Option<T>> = list
            .unwrap_or_default()
            .iter()
            .enumerate()
            .map(|(i, v)| self.value(v, &format!("{pointer}/{name}/{i}")))
            .collect();
        items.into_iter().collect()
    }
}
