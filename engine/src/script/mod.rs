//! The scripting language: the only room that imports rhai.
