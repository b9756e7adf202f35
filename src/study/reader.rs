//! Reading a study's document from JSON, with a pointer for every fault.

use serde_json::{Map, Value};

use super::document::{
    CrossCovariance, Demand, Document, Headline, Interval, SampleBounds, default_level,
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
        })
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
        let map = self.part(map, name, &["volume", "activity", "relative_price"])?;
        let pointer = format!("/{name}");
        let volume = self.field(map, &pointer, "volume");
        let activity = self.field(map, &pointer, "activity");
        let relative_price = self.field(map, &pointer, "relative_price");
        Some(Demand {
            volume: volume?,
            activity: activity?,
            relative_price: relative_price?,
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
}
