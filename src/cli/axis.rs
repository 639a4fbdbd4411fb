//! A number with the values that a sweep gives it: `--over` and the key `over` of job files.

use std::str::FromStr;

use serde::{Deserialize, Serialize};

use crate::quote::sweep::{Axis, Parameter};

use super::values::Finite;

/// `tolerance_nm=1,2,3` or `tolerance_nm=1:3:3`.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
#[serde(try_from = "String", into = "String")]
pub(super) struct AxisArg(pub(super) Axis);

impl FromStr for AxisArg {
    type Err = String;

    fn from_str(text: &str) -> Result<Self, String> {
        let form = "expected KEY=V1,V2 or KEY=FROM:TO:HOW-MANY, as tolerance_nm=1.5,2,3";
        let (name, values) = text.split_once('=').ok_or(form)?;
        let name = name.replace('-', "_");
        let parameter = Parameter::named(&name)
            .ok_or_else(|| format!("`{name}` is no number of a profile, nor tolerance_nm"))?;
        let number = |text: &str| {
            let number = text.trim().parse::<Finite>().map(|Finite(x)| x);
            number.map_err(|_| form.to_owned())
        };
        let ends: Vec<&str> = values.split(':').collect();
        let values = match ends[..] {
            [from, to, many] => {
                let (from, to) = (number(from)?, number(to)?);
                let many: u16 = many.trim().parse().map_err(|_| form.to_owned())?;
                if many < 2 {
                    return Err(form.to_owned());
                }
                let share = |i: u16| f64::from(i) / f64::from(many - 1);
                (0..many)
                    .map(|i| from + (to - from) * share(i))
                    .collect::<Vec<f64>>()
            }
            [_] => values.split(',').map(number).collect::<Result<_, _>>()?,
            _ => return Err(form.to_owned()),
        };
        if parameter == Parameter::Tolerance
            && let Some(wrong) = values.iter().find(|x| !(**x > 0.0 && **x <= 1000.0))
        {
            return Err(format!(
                "`{name}` is {wrong}, expected a number over 0, up to 1000"
            ));
        }
        Ok(Self(Axis { parameter, values }))
    }
}

impl TryFrom<String> for AxisArg {
    type Error = String;

    fn try_from(text: String) -> Result<Self, String> {
        text.parse()
            .map_err(|error| format!("found `{text}`: {error}"))
    }
}

/// Every value spelled out.
impl From<AxisArg> for String {
    fn from(AxisArg(axis): AxisArg) -> Self {
        let values: Vec<String> = axis.values.iter().map(f64::to_string).collect();
        format!("{}={}", axis.parameter.name(), values.join(","))
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn values_are_a_list_or_a_range() {
        let values = |text: &str| AxisArg::from_str(text).map(|AxisArg(axis)| axis.values);
        assert_eq!(values("tolerance-nm=1,2.5").unwrap(), [1.0, 2.5]);
        assert_eq!(values("sigma_nm=10:20:3").unwrap(), [10.0, 15.0, 20.0]);
        // As job files have it.
        let axis = AxisArg::from_str("sigma_nm=10:11:4").unwrap();
        let text = String::from(axis.clone());
        assert_eq!(text, "sigma_nm=10,10.333333333333334,10.666666666666666,11");
        assert_eq!(AxisArg::try_from(text), Ok(axis));
        for wrong in [
            "sigma_nm",
            "sigma_nm=",
            "sigma_nm=1:2",
            "sigma_nm=1:2:1",
            "sigma_nm=a",
            "nobody=1",
            "tolerance_nm=0",
        ] {
            assert!(values(wrong).is_err(), "{wrong}");
        }
    }
}
