//! Many-body ionization energies against an independent program and near-exact values.

#[path = "many_body/adc.rs"]
mod adc;
#[path = "many_body/identities.rs"]
mod identities;
#[path = "many_body/levels.rs"]
mod levels;
#[path = "many_body/p3.rs"]
mod p3;
#[path = "many_body/second_order.rs"]
mod second_order;
#[path = "many_body/support.rs"]
mod support;
