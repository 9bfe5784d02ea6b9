//! Physical constants.

/// Boltzmann constant in J/K, exact by definition of the SI (2019).
pub const BOLTZMANN: f64 = 1.380649e-23;
/// Elementary charge in C, exact by definition of the SI (2019).
pub const ELEMENTARY_CHARGE: f64 = 1.602176634e-19;
/// Reference temperature of every device parameter in K (25 °C, as on data sheets: common practice).
pub const REFERENCE_TEMPERATURE: f64 = 298.15;
/// 0 °C in K.
pub const ZERO_CELSIUS: f64 = 273.15;

/// Thermal voltage k·T/q in volts at `temperature` in kelvin.
pub fn thermal_voltage(temperature: f64) -> f64 {
    BOLTZMANN * temperature / ELEMENTARY_CHARGE
}
