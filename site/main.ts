// Placeholder of the page: starts the engine and shows what it says.
import { startEngine } from "./engine/pool";
import "./style.css";

const page = document.getElementById("page")!;
startEngine().then(
  (engine) => (page.textContent = JSON.stringify(engine.hello)),
  (error: Error) => (page.textContent = error.message),
);
