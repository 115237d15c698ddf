//! Prices of parts by their tolerance, as flags.

use clap::Args;

use crate::parts::Price;
use crate::text::Fault;
use crate::units::parse_number;

/// What one part of each tolerance costs.
#[derive(Clone, Debug, Default, Args)]
pub struct PriceArgs {
    /// What one resistor of each tolerance costs, such as 5%=0.005,1%=0.01,0.1%=0.08; with or without a currency.
    #[arg(long, value_name = "TOLERANCE=PRICE", value_delimiter = ',', allow_hyphen_values = true)]
    pub resistor_price: Vec<String>,
    /// What one capacitor of each tolerance costs.
    #[arg(long, value_name = "TOLERANCE=PRICE", value_delimiter = ',', allow_hyphen_values = true)]
    pub capacitor_price: Vec<String>,
}

/// The flags as values.
#[derive(Clone, Debug, Default, PartialEq, Eq)]
pub struct Prices {
    /// By step of resistors, in millionths of the currency.
    pub resistors: Vec<Option<u64>>,
    /// By step of capacitors.
    pub capacitors: Vec<Option<u64>>,
    /// The currency, where one is written.
    pub currency: Option<String>,
}

impl PriceArgs {
    /// Reads the prices of these steps; `None` where no flag is given.
    pub fn read(&self, resistors: &[f64], capacitors: &[f64], faults: &mut Vec<Fault>) -> Option<Prices> {
        const FLAGS: [&str; 2] = ["--resistor-price", "--capacitor-price"];
        let PriceArgs { resistor_price, capacitor_price } = self;
        let missing = match (resistor_price.is_empty(), capacitor_price.is_empty()) {
            (true, true) => return None,
            (true, false) => Some(FLAGS[0]),
            (false, true) => Some(FLAGS[1]),
            (false, false) => None,
        };
        if let Some(flag) = missing {
            let fault = Fault::at(flag, "the prices of this kind are missing: a board takes parts of both");
            faults.push(fault.help(format!("add {flag}, such as {flag} 5%=0.05,1%=0.10")));
        }
        let mut currencies: Vec<Option<String>> = Vec::new();
        let mut read = |flag: &str, texts: &[String], steps: &[f64]| {
            let mut prices = vec![None; steps.len()];
            for text in texts {
                match one(text, steps) {
                    Ok((step, _)) if prices[step].is_some() => {
                        faults.push(
                            Fault::at(flag, format!("\"{text}\": this tolerance has a price already"))
                                .help("keep one of the two"),
                        );
                    }
                    Ok((step, price)) => {
                        prices[step] = Some(price.millionths);
                        if !currencies.contains(&price.currency) {
                            currencies.push(price.currency);
                        }
                    }
                    Err(fault) => faults.push(Fault { path: flag.to_string(), ..fault }),
                }
            }
            prices
        };
        let (resistors, capacitors) =
            (read(FLAGS[0], resistor_price, resistors), read(FLAGS[1], capacitor_price, capacitors));
        if currencies.len() > 1 {
            let named: Vec<&str> = currencies.iter().map(|name| name.as_deref().unwrap_or("none")).collect();
            let message = format!("the prices have several currencies: {}", named.join(", "));
            faults.push(
                Fault::at("--resistor-price", message).help("write all prices in one currency, or all without"),
            );
        }
        Some(Prices { resistors, capacitors, currency: currencies.into_iter().flatten().next() })
    }
}

/// The step and the price of `1%=0.02`.
fn one(text: &str, steps: &[f64]) -> Result<(usize, Price), Fault> {
    let in_percent = |step: &f64| format!("{} %", 100.0 * step);
    let Some((tolerance, price)) = text.split_once('=') else {
        let fault = Fault::at("", format!("\"{text}\" is no price of a tolerance"));
        return Err(fault.help("write the tolerance and the price of one part, such as 1%=0.02"));
    };
    let found = parse_number(tolerance).ok().filter(|_| tolerance.contains('%'));
    let step = found.and_then(|found| steps.iter().position(|step| (step / found - 1.0).abs() < 1e-9));
    let Some(step) = step else {
        let known: Vec<String> = steps.iter().map(in_percent).collect();
        let fault = Fault::at("", format!("\"{tolerance}\" is none of the tolerances that are compared"));
        return Err(fault.help(format!("they are {}", known.join(", "))));
    };
    match Price::read(price.trim()) {
        Some(price) => Ok((step, price)),
        None => {
            let fault = Fault::at("", format!("\"{price}\" is no price from 0 to 1000000"));
            Err(fault.help("write an amount with a decimal point, such as 0.02, €0.02 or 0.02 EUR"))
        }
    }
}
