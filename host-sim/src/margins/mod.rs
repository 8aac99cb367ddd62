//! How far each imperfection can go before a play stops settling.
