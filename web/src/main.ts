import { mount } from 'svelte';
import App from './App.svelte';
import './look.css';

const page = document.getElementById('page');
if (page === null) throw new Error('index.html has no element "page"');
mount(App, { target: page });
