//! Files of a set: written whole or not at all, resumed, worst outcome kept.
