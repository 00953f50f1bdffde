//! Measurements on their way in: payload decoders, topics, MQTT, recorded files.
